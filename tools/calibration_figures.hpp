#pragma once

#include <optional>
#include <string>
#include <vector>

#include "config/calibration.hpp"
#include "config/result.hpp"

/// From a sensor's readings beside a reference to its gain, its offset and their uncertainty, after JCGM
/// 100:2008 (GUM). Pure.
///
/// The model, for a sampled channel: volts = (shown + offset) · gain. A.c. readings give the gain, by least
/// squares through zero: an r.m.s. value cannot tell an offset, which enters it as a square. D.c. readings
/// give the offset. A channel of which only r.m.s. values are known (a polled meter) gets the line through
/// its readings, gain and offset of the r.m.s. value itself.
namespace tramline::tools {

/// One reading as it goes into the figures.
struct SensorReading {
  config::CalibrationReading reading;  ///< what the logger shows with the calibration in force
  /// Standard deviation of the mean of the values it was drawn from; absent: a single value.
  std::optional<double> scatter_v;
};

/// All that the figures follow from.
struct Comparison {
  double nominal_v = 0.0;
  bool rms_only = false;
  double gain_now = 1.0;  ///< in force, which the readings are shown with
  double offset_now_v = 0.0;
  std::optional<double> offset_now_expanded_v;
  std::vector<SensorReading> readings;
  /// The reference's expanded uncertainty, both parts with k: percent of its reading, and volts.
  double reference_expanded_pct = 0.0;
  double reference_expanded_v = 0.0;
  double reference_k = 2.0;
  std::optional<double> resolution_v;            ///< one step of the logger's value as it was read
  std::optional<double> reference_resolution_v;  ///< one step of the reference's display
  std::optional<double> temperature_coefficient_ppm_per_k;
  std::optional<double> temperature_span_k;  ///< how far the temperature goes from that of the comparison
};

/// One line of the uncertainty budget.
struct BudgetLine {
  std::string component;
  char type = 'B';  ///< A: from scatter; B: otherwise
  std::string distribution;
  double standard_v = 0.0;    ///< standard uncertainty at nominal voltage
  bool proportional = false;  ///< shrinks with the voltage; else the same at any
};

/// One reading before and after.
struct ReadingFigures {
  config::CalibrationReading reading;
  double error_v = 0.0;     ///< as found: shown - reference
  double residual_v = 0.0;  ///< as left: what the new calibration shows - reference
};

struct CalibrationFigures {
  double gain = 1.0;
  double offset_v = 0.0;
  std::optional<double> offset_expanded_v;
  std::vector<ReadingFigures> readings;
  std::vector<BudgetLine> budget;
  double combined_v = 0.0;  ///< standard uncertainty at nominal
  /// Expanded with k: at a voltage U the root of the sum of the squares of `expanded_pct` of U and
  /// `expanded_v`; rounded up to two digits (JCGM 100, 7.2.6).
  double expanded_pct = 0.0;
  double expanded_v = 0.0;
  double expanded_at_nominal_v = 0.0;
  double k = 2.0;
  bool linear = true;                ///< false: the readings show that the sensor is not proportional
  std::vector<std::string> remarks;  ///< what the reader must know, a sentence each
};

/// Error for readings that make no calibration: none, no a.c. reading, a gain further than 20 % from 1, a
/// reading that contradicts the others.
[[nodiscard]] Result<CalibrationFigures> calibration_figures(const Comparison& comparison);

/// `x` rounded up to two significant digits.
[[nodiscard]] double rounded_up(double x);

}  // namespace tramline::tools
