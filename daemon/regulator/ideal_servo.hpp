#pragma once

#include <cstdint>
#include <optional>

#include "config/site.hpp"
#include "daemon/regulator/half_cycle_pair.hpp"

namespace tramline::regulator {

/// A servo without faults, of the declared range and speed, given the same input as the real one.
///
/// While no excursion is under way the ideal wiper stands where the real one stands; from the moment the
/// output leaves the band it does what such a servo can do: after the declared response time it moves towards
/// the needed ratio, target / U_in, at the declared speed, and no further than the ends of its range. If its
/// output would be outside the band too, no regulator of this range and speed could have held it. Where no
/// speed is declared it moves at once, so that only the range excuses. Where the input is too low for a ratio
/// the motor, which the mains feeds, stands still. One phase, one thread; allocates nothing.
class IdealServo {
 public:
  IdealServo(const config::RegulatorSettings& settings, double nominal_v);

  /// Advances to `pair`, whose input must be measured. `excursion`: the real output is outside the band, or
  /// has not yet been back in it for long enough. Returns the output it would have given.
  double follow(const HalfCyclePair& pair, bool excursion);

  void restart() { last_ns_.reset(); }

 private:
  config::RegulatorSettings settings_;
  std::optional<double> ratio_a_second_;
  double ratio_;
  std::int64_t out_since_ns_ = 0;
  bool out_ = false;
  std::optional<std::int64_t> last_ns_;
};

}  // namespace tramline::regulator
