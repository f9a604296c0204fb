#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "config/units.hpp"

/// The calibration of a site's sensors: what a comparison with a reference found, and for how much it is
/// good. Plain values; CALIBRATION-FILE.md describes the file they are kept in.
namespace tramline::config {

/// The logger's value beside the reference's, at the same time.
struct CalibrationReading {
  enum class Kind {
    ac,  ///< r.m.s. values: they give the gain
    dc,  ///< means: they give the offset, which an r.m.s. value cannot tell
  };
  Kind kind = Kind::ac;
  double shown_v = 0.0;
  double reference_v = 0.0;
};

/// The calibration of one channel:
/// volts = ((raw + site_offset) · site_scale + offset_v) · gain,
/// `site_scale` and `site_offset` being those of the site file it was made with.
struct ChannelCalibration {
  Channel channel;
  UtcNs date;
  double site_scale = 1.0;
  double site_offset = 0.0;
  double gain = 1.0;
  double offset_v = 0.0;
  /// The expanded uncertainty of a voltage is the root of the sum of the squares of a part in percent of that
  /// voltage and a part in volts: see `expanded_v_at()`.
  double expanded_pct = 0.0;
  double expanded_v = 0.0;
  double k = 2.0;                           ///< coverage factor of these
  std::optional<double> offset_expanded_v;  ///< of offset_v; absent: the offset was never determined
  std::string reference;                    ///< what it was compared with, and the certificate
  double reference_expanded_pct = 0.0;      ///< of the reference: percent of its reading ...
  double reference_expanded_v = 0.0;        ///< ... and volts, both with reference_k
  double reference_k = 2.0;
  std::optional<UtcNs> reference_date;  ///< of the reference's own certificate
  std::optional<UtcNs> due;
  std::optional<double> temperature_c;
  std::optional<double> temperature_coefficient_ppm_per_k;
  std::optional<double> temperature_span_k;
  std::string note;
  std::vector<CalibrationReading> readings;  ///< as the logger showed them with the calibration before
};

/// All that is in force at a site.
struct Calibration {
  std::vector<ChannelCalibration> channels;  ///< in the order of the channels, each once
  std::string text;                          ///< the file as read; empty if there is none

  /// nullptr: this channel was not calibrated.
  [[nodiscard]] const ChannelCalibration* of(Channel channel) const;
};

/// Expanded uncertainty, with the calibration's k, of an r.m.s. value of `volts`.
[[nodiscard]] double expanded_v_at(const ChannelCalibration& calibration, double volts);

/// Whether it was to be done again before `now`.
[[nodiscard]] bool past_due(const ChannelCalibration& calibration, UtcNs now);

/// "the calibration of input L1 of 2025-02-01 was due again on 2026-02-01", one for each channel past due;
/// dates as clocks in `zone` show them.
[[nodiscard]] std::vector<std::string> due_reminders(const Calibration& calibration, UtcNs now,
                                                     const std::string& zone);

/// "input L1"
[[nodiscard]] std::string name_of(Channel channel);

struct ChannelSettings;
/// Puts the calibration of a channel into the scale, offset and range that turn its samples into volts, so
/// that a source needs to know nothing of it. Once; `settings` are the site file's.
void apply(const ChannelCalibration& calibration, ChannelSettings& settings);

}  // namespace tramline::config
