#include "tools/calibration_figures.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>

#include "config/calibration_file.hpp"
#include "tools/line_fit.hpp"

namespace tramline::tools {
namespace {

using Kind = config::CalibrationReading::Kind;

constexpr double kCoverage = 2.0;  // about 95 % (JCGM 100, 6.3.3)
constexpr double kLargestDisagreement =
    0.02;                                   // of the reference: beyond this a figure was read or typed wrong
constexpr double kLeastSpread = 0.02;       // of nominal: between the levels of a test of linearity
constexpr double kLeastSpreadOfLine = 0.1;  // of nominal: between the levels of a line that is applied
constexpr double kFewDegrees = 10.0;        // of freedom: below, k = 2 covers clearly less than 95 %

double standard_of_step(double step) {
  return step / std::sqrt(12.0);  // rectangular, half a step to either side (JCGM 100, F.2.2.1)
}

double square(double x) {
  return x * x;
}

double rounded(double x, double steps) {
  return std::round(x * steps) / steps;
}

/// The a.c. readings, x what the logger shows without its offset, y the reference.
struct AcReadings {
  std::vector<FitPoint> points;
  double lowest_v = 0.0;  ///< of the references
  double highest_v = 0.0;
  double scatter_v = 0.0;  ///< of a single reading drawn from several values; 0: not known
  bool scatter_known = false;
};

struct Offset {
  double add_v = 0.0;  ///< to what the logger shows
  std::optional<double> standard_v;
};

class Computation {
 public:
  explicit Computation(const Comparison& comparison) : ask_(comparison) {}

  Result<CalibrationFigures> run();

 private:
  [[nodiscard]] Status check_readings() const;
  void take_ac(const Offset& offset);
  [[nodiscard]] Offset offset_for(double gain) const;
  [[nodiscard]] double reference_standard_v(double at_v) const {
    return std::hypot(ask_.reference_expanded_pct / 100.0 * at_v, ask_.reference_expanded_v) /
           ask_.reference_k;
  }
  void look_at_linearity();
  void line_of_rms();
  void fill_budget(const Offset& offset);
  void add(std::string component, char type, std::string distribution, double standard_v, bool proportional) {
    out_.budget.push_back({std::move(component), type, std::move(distribution), standard_v, proportional});
  }
  [[nodiscard]] Status check_outcome() const;
  void remark(std::string sentence) { out_.remarks.push_back(std::move(sentence)); }

  const Comparison& ask_;
  CalibrationFigures out_;
  AcReadings ac_;
  ProportionFit proportion_;
  double gain_ = 1.0;  ///< on what the logger shows
  double add_v_ = 0.0;
  bool line_applied_ = false;
  double largest_residual_v_ = 0.0;
  std::optional<LineFit> line_;     ///< of a test of linearity that could be made
  std::optional<double> line_u_v_;  ///< r.m.s. only: type A, at nominal or at the worst of the readings
  std::size_t degrees_of_freedom_ = 0;
};

Status Computation::check_readings() const {
  std::size_t ac = 0;
  for (const SensorReading& r : ask_.readings) {
    const auto& [kind, shown_v, reference_v] = r.reading;
    const std::string where = fmt::format("reading {}={}", shown_v, reference_v);
    if (!std::isfinite(shown_v) || !std::isfinite(reference_v))
      return Error{where, "this is no pair of voltages", "give volts"};
    if (kind == Kind::dc) {
      if (ask_.rms_only)
        return Error{where, "this channel gives r.m.s. values only, which have no d.c. part",
                     "give a.c. readings at several levels"};
      if (std::abs(reference_v - shown_v) > 0.2 * ask_.nominal_v)
        return Error{where, "the offset would be more than 20 % of the nominal voltage",
                     "look at offset and scale in the site file first"};
      continue;
    }
    ++ac;
    if (!(shown_v > 0.0) || !(reference_v > 0.0))
      return Error{where, "an r.m.s. value of a comparison is greater than 0",
                   "compare at a voltage; for the offset give a --dc-reading"};
  }
  if (ac == 0) {
    return Error{"calibrate", "there is no a.c. reading, and without one there is no gain",
                 "give --reading LOGGER=REFERENCE, or --at TIME=REFERENCE"};
  }
  if (ask_.readings.size() > config::kMostReadings)
    return Error{"calibrate", "these are more readings than are kept",
                 fmt::format("give at most {}", config::kMostReadings)};
  return kDone;
}

void Computation::take_ac(const Offset& offset) {
  ac_ = {};
  for (const SensorReading& r : ask_.readings) {
    if (r.reading.kind != Kind::ac) continue;
    const double shown_square = square(r.reading.shown_v) - square(ask_.rms_only ? 0.0 : offset.add_v);
    const double reference_v = r.reading.reference_v;
    ac_.points.push_back({std::sqrt(std::max(0.0, shown_square)), reference_v, 0.0});
    ac_.lowest_v = ac_.points.size() == 1 ? reference_v : std::min(ac_.lowest_v, reference_v);
    ac_.highest_v = std::max(ac_.highest_v, reference_v);
    ac_.scatter_known = ac_.scatter_known || r.scatter_v.has_value();
    ac_.scatter_v = std::max(ac_.scatter_v, r.scatter_v.value_or(0.0));
  }
}

/// shown + add_v, times the gain, is the reference's mean.
Offset Computation::offset_for(double gain) const {
  Offset offset;
  std::vector<double> found;
  double reference_standard_sum = 0.0;
  for (const SensorReading& r : ask_.readings) {
    if (r.reading.kind != Kind::dc) continue;
    found.push_back(r.reading.reference_v / gain - r.reading.shown_v);
    // At a shorted input the reference is 0 V by definition, whatever a meter would be good for.
    if (r.reading.reference_v != 0.0) reference_standard_sum += reference_standard_v(r.reading.reference_v);
  }
  if (found.empty()) return offset;
  const auto n = static_cast<double>(found.size());
  for (const double v : found)
    offset.add_v += v / n;
  double variance = 0.0;
  if (found.size() > 1) {
    for (const double v : found)
      variance += square(v - offset.add_v) / (n - 1.0) / n;
  }
  variance += square(standard_of_step(ask_.resolution_v.value_or(0.0)));
  variance += square(reference_standard_sum / n);
  offset.standard_v = std::sqrt(variance);
  return offset;
}

void Computation::look_at_linearity() {
  if (ac_.points.size() < 2) return;
  if (ac_.highest_v - ac_.lowest_v < kLeastSpread * ask_.nominal_v) {
    remark("All readings stand at one level; whether the sensor is linear they cannot tell.");
    return;
  }
  const auto line = fit_line(ac_.points);
  if (!line) return;
  // What stands against the intercept: the scatter about the line, or if that is more the steps of the two
  // displays, and of the reference what may be the same number of volts at every level.
  std::vector<FitPoint> stepped = ac_.points;
  for (FitPoint& p : stepped)
    p.u_y = std::hypot(standard_of_step(ask_.resolution_v.value_or(0.0)),
                       standard_of_step(ask_.reference_resolution_v.value_or(0.0)));
  const auto of_steps = fit_line_weighted(stepped);
  double own_v = of_steps ? of_steps->u_intercept : 0.0;
  if (line->degrees_of_freedom > 0) own_v = std::max(own_v, line->u_intercept);
  if (line->degrees_of_freedom == 0 && !of_steps) {
    remark("Two readings without a resolution cannot tell whether the sensor is linear; take a third.");
    return;
  }
  line_ = line;
  line_->u_intercept = std::hypot(own_v, ask_.reference_expanded_v / ask_.reference_k);
  out_.linear = std::abs(line_->intercept) <= 2.0 * line_->u_intercept;
  if (out_.linear) return;
  remark(fmt::format(
      "The sensor is not linear: a straight line through the readings meets {:+.2f} V where it should meet 0 "
      "(standard uncertainty {:.2f} V). The gain alone is applied, and the uncertainty is widened by the "
      "largest "
      "residual, {:.2f} V.",
      line_->intercept, line_->u_intercept, largest_residual_v_));
  const bool offset_known = std::any_of(ask_.readings.begin(), ask_.readings.end(),
                                        [](const SensorReading& r) { return r.reading.kind == Kind::dc; });
  if (!offset_known && !ask_.rms_only && line_->intercept < 0.0)
    remark(
        "An offset that no d.c. reading has told would look the same; short the sensor's input and give "
        "one.");
}

void Computation::line_of_rms() {
  if (ac_.highest_v - ac_.lowest_v < kLeastSpreadOfLine * ask_.nominal_v) {
    remark(
        "This channel gives r.m.s. values only. A line needs readings at least 10 % of the nominal voltage "
        "apart; "
        "the gain alone is applied.");
    return;
  }
  const auto line = fit_line(ac_.points);
  if (!line || !(line->slope > 0.0)) return;
  gain_ = line->slope;
  add_v_ = line->intercept / line->slope;
  degrees_of_freedom_ = line->degrees_of_freedom;
  line_applied_ = true;
  if (line->degrees_of_freedom == 0) {
    remark(
        "Two readings make a line without residuals, so that its repeatability is not known; take a third.");
    return;
  }
  double worst = line->u_at(ask_.nominal_v / gain_ - add_v_);
  for (const FitPoint& p : ac_.points)
    worst = std::max(worst, line->u_at(p.x));
  line_u_v_ = worst;
}

void Computation::fill_budget(const Offset& offset) {
  const double nominal_v = ask_.nominal_v;
  double sum_x = 0.0;
  double sum_xx = 0.0;
  for (const FitPoint& p : ac_.points) {
    sum_x += p.x;
    sum_xx += square(p.x);
  }
  // What the same number of volts at every reading does to the gain, as part of it.
  const auto of_common_volts = [&](double volts) { return volts * sum_x / sum_xx / proportion_.slope; };
  const double reference =
      std::hypot(ask_.reference_expanded_pct / 100.0, of_common_volts(ask_.reference_expanded_v)) /
      ask_.reference_k;
  add("reference, common to all readings", 'B', fmt::format("certificate, k = {:g}", ask_.reference_k),
      reference * nominal_v, true);

  if (line_applied_) {
    if (line_u_v_) add("repeatability of the line", 'A', "normal", *line_u_v_, false);
  } else if (proportion_.degrees_of_freedom > 0) {
    // Where the sensor is not linear, what is left about the line is scatter; the bend has a line of its own.
    const bool bent = !out_.linear && line_ && line_->degrees_of_freedom > 0;
    const double u = bent ? line_->residual / std::sqrt(sum_xx) : proportion_.u_slope;
    degrees_of_freedom_ = bent ? line_->degrees_of_freedom : proportion_.degrees_of_freedom;
    add("repeatability", 'A', "normal", u / proportion_.slope * nominal_v, true);
  } else if (ac_.scatter_known) {
    add("repeatability, within the reading", 'A', "normal",
        of_common_volts(proportion_.slope * ac_.scatter_v) * nominal_v, true);
  } else {
    remark("Repeatability is not known from one reading; give several, taken one after the other.");
  }
  if (ask_.resolution_v)
    add("logger's resolution", 'B', "rectangular",
        of_common_volts(proportion_.slope * standard_of_step(*ask_.resolution_v)) * nominal_v, true);
  if (ask_.reference_resolution_v)
    add("reference's resolution", 'B', "rectangular",
        of_common_volts(standard_of_step(*ask_.reference_resolution_v)) * nominal_v, true);
  if (ask_.temperature_coefficient_ppm_per_k && ask_.temperature_span_k)
    add("temperature", 'B', "rectangular",
        *ask_.temperature_coefficient_ppm_per_k * 1e-6 * *ask_.temperature_span_k / std::sqrt(3.0) *
            nominal_v,
        true);
  if (!out_.linear) add("non-linearity", 'B', "rectangular", largest_residual_v_ / std::sqrt(3.0), false);

  double proportional = 0.0;
  double constant = 0.0;
  double type_a = 0.0;
  for (const BudgetLine& line : out_.budget) {
    (line.proportional ? proportional : constant) += square(line.standard_v);
    if (line.type == 'A') type_a += square(line.standard_v);
  }
  out_.k = kCoverage;
  out_.combined_v = std::sqrt(proportional + constant);
  out_.expanded_pct = rounded_up(100.0 * kCoverage * std::sqrt(proportional) / nominal_v);
  out_.expanded_v = rounded_up(kCoverage * std::sqrt(constant));
  out_.expanded_at_nominal_v = std::hypot(out_.expanded_pct / 100.0 * nominal_v, out_.expanded_v);

  // Welch-Satterthwaite, all but the scatter being as good as known (JCGM 100, G.4.1).
  if (type_a > 0.0 && degrees_of_freedom_ > 0) {
    const double effective =
        square(proportional + constant) / (square(type_a) / static_cast<double>(degrees_of_freedom_));
    if (effective < kFewDegrees) {
      remark(
          fmt::format("The scatter of few readings makes up most of the uncertainty ({:.0f} effective "
                      "degrees of freedom): "
                      "k = 2 covers less than 95 %. Take more readings.",
                      std::floor(effective)));
    }
  }
  if (offset.standard_v) {
    out_.offset_expanded_v = rounded_up(kCoverage * *offset.standard_v * gain_);
  } else if (!ask_.rms_only) {
    out_.offset_expanded_v = ask_.offset_now_expanded_v;
    remark(ask_.offset_now_expanded_v
               ? "The offset stays as it was: only a d.c. reading can tell it."
               : "The offset was not determined: only a d.c. reading can tell it. It matters little near the "
                 "nominal voltage, but a voltage near zero (an interruption) may read too high.");
  }
  if (ac_.lowest_v > 1.2 * nominal_v || ac_.highest_v < 0.8 * nominal_v) {
    remark(
        fmt::format("The readings ({:.1f} to {:.1f} V) are far from the nominal {:g} V, where the figures "
                    "are used; compare "
                    "near it.",
                    ac_.lowest_v, ac_.highest_v, nominal_v));
  }
}

Status Computation::check_outcome() const {
  for (std::size_t i = 0; i < out_.readings.size(); ++i) {
    const ReadingFigures& r = out_.readings[i];
    if (r.reading.kind != Kind::ac || std::abs(r.residual_v) <= kLargestDisagreement * r.reading.reference_v)
      continue;
    return Error{fmt::format("reading {}={}", r.reading.shown_v, r.reading.reference_v),
                 fmt::format("it is {:+.1f} V off the others", r.residual_v),
                 "take it again, or leave it out: no sensor to be calibrated bends by more than 2 %"};
  }
  if (out_.gain < config::kLowestGain || out_.gain > config::kHighestGain) {
    return Error{
        "calibrate", fmt::format("the gain would be {:.4g}, further than 20 % from 1", out_.gain),
        "scale in the site file is probably wrong, or this is another channel; put that right first"};
  }
  return kDone;
}

Result<CalibrationFigures> Computation::run() {
  if (auto sound = check_readings(); !sound) return sound.error();
  // The offset that stands in the r.m.s. readings depends a little on the gain, and the gain on it.
  Offset offset;
  for (int i = 0; i < 4; ++i) {
    take_ac(offset);
    const auto fit = fit_proportion(ac_.points);
    if (!fit || !(fit->slope > 0.0) || !std::isfinite(fit->slope))
      return Error{"calibrate", "these readings give no gain", "read both meters again"};
    proportion_ = *fit;
    offset = offset_for(proportion_.slope);
  }
  gain_ = proportion_.slope;
  add_v_ = offset.add_v;
  for (const FitPoint& p : ac_.points)
    largest_residual_v_ = std::max(largest_residual_v_, std::abs(p.y - gain_ * p.x));
  if (ask_.rms_only) line_of_rms();
  if (!line_applied_) look_at_linearity();

  out_.gain = rounded(ask_.gain_now * gain_, 1e7);
  out_.offset_v = rounded(ask_.offset_now_v + add_v_ / ask_.gain_now, 1e5);
  for (const SensorReading& r : ask_.readings) {
    const double shown_v = r.reading.shown_v;
    const bool squares = r.reading.kind == Kind::ac && !ask_.rms_only;
    const double left_v =
        gain_ * (squares ? std::sqrt(std::max(0.0, square(shown_v) - square(add_v_))) : shown_v + add_v_);
    out_.readings.push_back({r.reading, shown_v - r.reading.reference_v, left_v - r.reading.reference_v});
  }
  if (auto sound = check_outcome(); !sound) return sound.error();
  fill_budget(offset);
  return std::move(out_);
}

}  // namespace

double rounded_up(double x) {
  if (!(x > 0.0) || !std::isfinite(x)) return 0.0;
  const int places = 1 - static_cast<int>(std::floor(std::log10(x)));
  const double unit = std::pow(10.0, places);
  // A figure that has two digits already is not to be raised for the last bit of it.
  return std::ceil(x * unit * (1.0 - 1e-12)) / unit;
}

Result<CalibrationFigures> calibration_figures(const Comparison& comparison) {
  return Computation(comparison).run();
}

}  // namespace tramline::tools
