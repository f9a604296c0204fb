#pragma once

#include <array>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "config/site.hpp"
#include "config/units.hpp"
#include "daemon/measure/block.hpp"
#include "daemon/measure/event_detector.hpp"
#include "daemon/measure/flag_timeline.hpp"
#include "daemon/measure/meter.hpp"
#include "daemon/measure/sample_clock.hpp"
#include "storage/records.hpp"

namespace tramline::measure {

/// Ten minutes or two hours of all channels, being filled.
struct ReadingSum {
  std::int64_t number = 0;  ///< of the interval since 1970
  std::int32_t readings = 0;
  std::int32_t inputs = 0;
  std::int64_t measured_ns = 0;
  struct OfChannel {
    double squares = 0.0;
    double low_v = storage::kNotMeasured;
    double high_v = storage::kNotMeasured;
    bool flagged = false;
    bool over_range = false;
  };
  std::vector<OfChannel> channels;
};

/// What Meter is for samples, for a transducer that is asked for its r.m.s. values: readings in, records out.
///
/// A reading stands in the place of a half-cycle value, from its own instant until the next one. So nothing
/// of IEC 61000-4-30 is claimed: what is shorter than the distance of the readings is not seen, an event's
/// times are as coarse as that, and there is neither frequency nor waveform nor 3-s value. Ten minutes and
/// two hours are the roots of the means of the squares of the readings that begin in them. A reading that
/// fails leaves the one before it standing for at most two and a half distances; then measuring has a gap.
/// Pure. One thread.
class PolledMeter {
 public:
  PolledMeter(const config::Site& site, const StreamShape& stream, double readings_every_s);

  /// `block` holds one frame: the readings of all channels at `block.first`, milliseconds.
  void take(const Block& block, MeterOutput& out);
  void finish(storage::EventEnd reason, const std::string& why, MeterOutput& out);
  void clock_state(const storage::ClockState& state) { clock_state_ = state; }

 private:
  void end_stretch(storage::EventEnd reason, const std::string& why, MeterOutput& out);
  void note_events(std::size_t from, MeterOutput& out);
  void add(const Block& block, UtcNs at, MeterOutput& out);
  void end_ten_minutes(MeterOutput& out);
  void end_two_hours(MeterOutput& out);
  void give_out(const ReadingSum& sum, storage::Interval interval, std::int64_t length_ns,
                MeterOutput& out) const;

  std::vector<Channel> channels_;
  std::int64_t every_ms_;
  SampleClock clock_;
  std::vector<std::optional<EventDetector>> detectors_;  // by side
  FlagTimeline flags_;
  storage::ClockState clock_state_;
  std::string why_begun_;

  bool in_stretch_ = false;
  std::int64_t stretch_begin_ns_ = 0;  // in sample time
  SampleIndex last_;                   // reading
  std::int64_t next_progress_ms_ = 0;
  std::optional<ReadingSum> ten_minutes_;
  std::optional<ReadingSum> two_hours_;
};

}  // namespace tramline::measure
