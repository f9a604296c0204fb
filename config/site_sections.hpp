#pragma once

#include "config/map_reader.hpp"
#include "config/site.hpp"

/// The sections of the site file but `source`: each function reads one, checks it, and notes every fault.
namespace tramline::config {

/// Which of the figures that other sections are checked against could be read.
struct SoundFigures {
  bool nominal_v = false;
  bool nominal_hz = false;
  bool phases = false;
  bool regulator = false;  ///< false also if there is none
};

inline constexpr double kLowestVolts = 1.0;
inline constexpr double kHighestVolts = 100'000.0;

SoundFigures read_site_section(MapReader& map, Site& site);
/// The list `channels` of the file's root map.
void read_channels(MapReader& root, Site& site, SoundFigures sound);
/// After `read_site_section()` and `read_events()`. True if the regulator is sound as a whole.
bool read_regulator(MapReader& map, Site& site, SoundFigures sound);
void read_events(MapReader& map, EventSettings& events);
void read_capture(MapReader& map, CaptureSettings& capture);
void read_logbook(MapReader& map, LogbookSettings& logbook);
void read_clock(MapReader& map, ClockSettings& clock);

}  // namespace tramline::config
