#include "daemon/regulator/half_cycle_pair.hpp"

#include <cmath>

namespace tramline::regulator {

using measure::HalfCycle;

std::optional<HalfCyclePair> PairMaker::take(const HalfCycle& half_cycle) {
  const bool is_input = half_cycle.channel.side == Side::input;
  if (!has_output_ || !has_input_) return one_sided(half_cycle);

  std::optional<HalfCyclePair> pair;
  if (is_input) {
    const Input input{half_cycle.value.begin, half_cycle.value.u_rms_v};
    if (output_waits_) {
      const bool last_is_nearer =
          input_known_ && std::abs(last_input_.at - waiting_.at) <= std::abs(input.at - waiting_.at);
      meet(waiting_, last_is_nearer ? last_input_.volts : input.volts);
      pair = waiting_;
      output_waits_ = false;
    }
    last_input_ = input;
    input_known_ = true;
  } else {
    if (output_waits_ && input_known_) {
      meet(waiting_, last_input_.volts);
      pair = waiting_;
    }
    waiting_ = one_sided(half_cycle);
    output_waits_ = true;
  }
  return pair;
}

void PairMaker::restart() {
  input_known_ = output_waits_ = false;
}

HalfCyclePair PairMaker::one_sided(const HalfCycle& half_cycle) const {
  HalfCyclePair pair;
  pair.phase = half_cycle.channel.phase;
  pair.at = half_cycle.value.begin;
  pair.begin = half_cycle.begin;
  pair.elapsed_ns = half_cycle.elapsed_ns;
  pair.window_ns = half_cycle.window_ns;
  (half_cycle.channel.side == Side::input ? pair.input_v : pair.output_v) = half_cycle.value.u_rms_v;
  return pair;
}

void PairMaker::meet(HalfCyclePair& pair, double input_v) const {
  pair.input_v = input_v;
  if (input_v >= least_input_v_) pair.ratio = pair.output_v / input_v;
}

}  // namespace tramline::regulator
