#pragma once

#include <cstdint>
#include <optional>

#include "config/units.hpp"
#include "daemon/measure/half_cycle.hpp"
#include "storage/records.hpp"

namespace tramline::regulator {

/// What one phase of the regulator was given and what it made of it, at one half cycle.
struct HalfCyclePair {
  Phase phase = Phase::l1;
  measure::SamplePosition at = 0.0;
  UtcNs begin;
  std::int64_t elapsed_ns = 0;
  std::int64_t window_ns = 0;  ///< length of one cycle
  double input_v = storage::kNotMeasured;
  double output_v = storage::kNotMeasured;
  double ratio = storage::kNotMeasured;  ///< U_out / U_in; not measured where the input is too low for one
};

/// Joins the half-cycle values of both sides of one phase into pairs on the output's time base.
///
/// Each output value meets the input value that begins nearest to it. A site with one side gives pairs with
/// the other not measured. One phase, one thread; allocates nothing.
class PairMaker {
 public:
  /// Below `least_input_v` a ratio means nothing.
  PairMaker(bool has_input, bool has_output, double least_input_v)
      : has_input_(has_input), has_output_(has_output), least_input_v_(least_input_v) {}

  /// Takes this phase's half-cycle values of both sides in the order of their begins.
  [[nodiscard]] std::optional<HalfCyclePair> take(const measure::HalfCycle& half_cycle);

  /// Values before a gap do not meet values after it.
  void restart();

 private:
  /// What a pair needs of an input value.
  struct Input {
    measure::SamplePosition at = 0.0;
    double volts = 0.0;
  };
  [[nodiscard]] HalfCyclePair one_sided(const measure::HalfCycle& half_cycle) const;
  void meet(HalfCyclePair& pair, double input_v) const;

  bool has_input_;
  bool has_output_;
  double least_input_v_;
  bool input_known_ = false;
  Input last_input_;
  bool output_waits_ = false;
  HalfCyclePair waiting_;  // the output's half, until the next input value shows which one is nearer
};

}  // namespace tramline::regulator
