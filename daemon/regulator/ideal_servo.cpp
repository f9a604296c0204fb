#include "daemon/regulator/ideal_servo.hpp"

#include <algorithm>
#include <cmath>

namespace tramline::regulator {

IdealServo::IdealServo(const config::RegulatorSettings& settings, double nominal_v)
    : settings_(settings), ratio_(std::clamp(1.0, settings.ratio_min, settings.ratio_max)) {
  if (settings.speed_v_per_s) ratio_a_second_ = *settings.speed_v_per_s / nominal_v;
}

double IdealServo::follow(const HalfCyclePair& pair, bool excursion) {
  const double step_s = last_ns_ ? static_cast<double>(pair.elapsed_ns - *last_ns_) / 1e9 : 0.0;
  last_ns_ = pair.elapsed_ns;
  if (!excursion && !std::isnan(pair.ratio)) {
    ratio_ = pair.ratio;
    out_ = false;
    return pair.output_v;
  }
  if (!out_) {
    out_ = true;
    out_since_ns_ = pair.elapsed_ns;
  }
  if (std::isnan(pair.ratio)) return ratio_ * pair.input_v;
  const bool responding = static_cast<double>(pair.elapsed_ns - out_since_ns_) / 1e9 >= settings_.response_s;
  const double needed =
      std::clamp(settings_.target_v / pair.input_v, settings_.ratio_min, settings_.ratio_max);
  if (!ratio_a_second_) {
    ratio_ = needed;
  } else if (responding) {
    const double most = *ratio_a_second_ * step_s;
    ratio_ += std::clamp(needed - ratio_, -most, most);
  }
  return ratio_ * pair.input_v;
}

}  // namespace tramline::regulator
