#include "daemon/acquire/servo_model.hpp"

#include <algorithm>
#include <cmath>
#include <iterator>

namespace tramline::acquire {
namespace {

using What = config::ScriptedHappening::What;

constexpr double kLatchWithin = 0.002;     // of ratio
constexpr double kLeastMotorVolts = 50.0;  // the mains feeds the motor; common practice, no source

bool concerns_servo(What what) {
  return what != What::sag && what != What::swell && what != What::interruption && what != What::level;
}

}  // namespace

ServoModel::ServoModel(const config::ServoSettings& servo,
                       const std::vector<config::ScriptedHappening>& script, double nominal_v, double input_v,
                       std::uint64_t seed)
    : servo_(servo), nominal_v_(nominal_v), load_a_(servo.load_a), random_(seed) {
  std::copy_if(script.begin(), script.end(), std::back_inserter(script_),
               [](const auto& h) { return concerns_servo(h.what); });
  // At rest with the load on.
  const double droop = 1.0 + servo_.output_impedance_ohm * load_a_ / nominal_v_;
  ratio_ = std::clamp(servo_.target_v * droop / input_v, servo_.ratio_min, servo_.ratio_max);
  gain_ = ratio_ / droop;
  sensed_v_ = gain_ * input_v;
  next_step_s_ = -std::log(1.0 - random_.unit()) * servo_.load_step_every_s;
}

ServoModel::Faults ServoModel::faults_now() {
  Faults faults;
  for (const auto& happening : script_) {
    if (t_s_ < happening.at_s) continue;
    if (happening.lasting_s > 0.0 && t_s_ >= happening.at_s + happening.lasting_s) continue;
    switch (happening.what) {
      case What::servo_stuck:
        faults.stuck = true;
        break;
      case What::servo_stuck_at:
        faults.sticks_at = happening.ratio;
        latched_ = latched_ || std::abs(ratio_ - happening.ratio) <= kLatchWithin;
        break;
      case What::servo_slow:
        faults.speed = happening.factor;
        break;
      case What::servo_reversed:
        faults.reversed = true;
        break;
      case What::servo_hunting:
        faults.filter = happening.factor;
        break;
      case What::output_open:
        faults.open = true;
        break;
      case What::load_step:
        load_a_ = happening.to_a;
        break;
      case What::sag:
      case What::swell:
      case What::interruption:
      case What::level:
        break;
    }
  }
  if (!faults.sticks_at) latched_ = false;
  faults.stuck = faults.stuck || latched_;
  return faults;
}

void ServoModel::change_load(double step_s) {
  load_a_ = servo_.load_a;
  if (!(servo_.load_step_a > 0.0) || !(servo_.load_step_every_s > 0.0)) return;
  next_step_s_ -= step_s;
  if (next_step_s_ > 0.0) return;
  stepped_ = !stepped_;
  next_step_s_ = -std::log(1.0 - random_.unit()) * servo_.load_step_every_s;
}

void ServoModel::advance(double input_v, double step_s) {
  change_load(step_s);
  const Faults faults = faults_now();
  const double load_a = load_a_ + (stepped_ ? servo_.load_step_a : 0.0);
  gain_ = faults.open ? 0.0 : ratio_ / (1.0 + servo_.output_impedance_ohm * load_a / nominal_v_);

  const double filter_s = servo_.sense_filter_s * faults.filter;
  const double output_v = gain_ * input_v;
  sensed_v_ += (output_v - sensed_v_) * (filter_s > 0.0 ? 1.0 - std::exp(-step_s / filter_s) : 1.0);
  move(faults, input_v, step_s);
  t_s_ += step_s;
}

void ServoModel::move(const Faults& faults, double input_v, double step_s) {
  const int wanted = sensed_v_ < servo_.comparator_low_v ? 1 : sensed_v_ > servo_.comparator_high_v ? -1 : 0;
  if (wanted != 0) {
    direction_ = faults.reversed ? -wanted : wanted;
    coasting_s_ = servo_.coast_s;
  } else if (coasting_s_ > 0.0) {
    coasting_s_ -= step_s;
  } else {
    direction_ = 0;
  }
  if (faults.stuck || input_v < kLeastMotorVolts) return;
  const double pace = servo_.speed_v_per_s / nominal_v_ * faults.speed;
  const double next = std::clamp(ratio_ + direction_ * pace * step_s, servo_.ratio_min, servo_.ratio_max);
  latched_ = faults.sticks_at && (ratio_ - *faults.sticks_at) * (next - *faults.sticks_at) <= 0.0;
  ratio_ = latched_ ? *faults.sticks_at : next;
}

}  // namespace tramline::acquire
