#pragma once

#include <cstdint>
#include <optional>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/noise.hpp"

namespace tramline::acquire {

/// One phase of a servo regulator: a window comparator behind a first-order sensing filter drives a motor of
/// constant speed, which turns the wiper between its end stops. Faults come by script. Steps in time; knows
/// nothing of waveforms.
///
/// Hunting that lasts needs a motor that coasts across the whole band (speed times coast_s above its width);
/// a slow filter alone overshoots a few times and then rests.
class ServoModel {
 public:
  /// Settings complete: nothing in `servo` is left to the site. `nominal_v`: the input at which the speed is
  /// stated. Starts at rest, with the ratio that puts `input_v` on target.
  ServoModel(const config::ServoSettings& servo, const std::vector<config::ScriptedHappening>& script,
             double nominal_v, double input_v, std::uint64_t seed);

  /// Advances by `step_s` at an input of `input_v` r.m.s.
  void advance(double input_v, double step_s);

  /// Position of the wiper: turns ratio at no load.
  [[nodiscard]] double ratio() const { return ratio_; }
  /// Output over input voltage now: the ratio, less what the load drops in the output's impedance; 0 while
  /// the output is open.
  [[nodiscard]] double gain() const { return gain_; }

 private:
  /// What the script does to the servo at this moment.
  struct Faults {
    bool stuck = false;
    std::optional<double> sticks_at;  // the ratio it sticks at as soon as it is there
    bool reversed = false;
    bool open = false;
    double speed = 1.0;
    double filter = 1.0;
  };
  [[nodiscard]] Faults faults_now();
  void move(const Faults& faults, double input_v, double step_s);
  void change_load(double step_s);

  config::ServoSettings servo_;
  std::vector<config::ScriptedHappening> script_;  // what concerns the servo
  double nominal_v_;
  double ratio_;
  double gain_ = 1.0;
  double sensed_v_;
  int direction_ = 0;  // of the motor
  double coasting_s_ = 0.0;
  bool latched_ = false;  // stuck at the ratio asked for
  double t_s_ = 0.0;
  double load_a_;
  bool stepped_ = false;  // the random part of the load is on
  double next_step_s_;
  Random random_;
};

}  // namespace tramline::acquire
