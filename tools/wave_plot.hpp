#pragma once

#include <optional>
#include <string>
#include <vector>

#include "config/site.hpp"
#include "storage/records.hpp"

namespace tramline::tools {

/// One captured channel in volts, with the half-cycle r.m.s. computed from it again by the same meter.
struct WaveTrace {
  Channel channel;
  std::vector<float> volts;
  struct HalfCyclePoint {
    double at_s;     ///< begin of the window, from the begin of the capture
    double until_s;  ///< end of the window
    double u_rms_v;
  };
  std::vector<HalfCyclePoint> half_cycles;
};

/// Volts and half-cycle values of each channel of a captured waveform.
[[nodiscard]] std::vector<WaveTrace> traces_of(const storage::Waveform& waveform, const config::Site& site);

/// The waveform of an event as a picture: a panel a channel with the voltage, its half-cycle r.m.s. over it,
/// the thresholds and, on the output, the band. Times from the event's begin. `undated`: do not speak of a
/// date.
[[nodiscard]] std::string wave_svg(const storage::Waveform& waveform, const storage::Event& event,
                                   const config::Site& site, bool undated);

/// The same as CSV: time, then each channel's volts and the half-cycle r.m.s. last begun, with units in the
/// header.
[[nodiscard]] std::string wave_csv(const storage::Waveform& waveform, const storage::Event& event,
                                   const config::Site& site);

}  // namespace tramline::tools
