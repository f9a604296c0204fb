#include "daemon/regulator/half_cycle_pair.hpp"

#include <cmath>

namespace tramline::regulator {

using measure::HalfCycle;

std::optional<HalfCyclePair> PairMaker::take(const HalfCycle& half_cycle) {
  const bool is_input = half_cycle.channel.side == Side::input;
  if (!has_output_) return join(&half_cycle, nullptr);
  if (!has_input_) return join(nullptr, &half_cycle);

  std::optional<HalfCyclePair> pair;
  if (is_input) {
    if (waiting_output_) {
      const double at = waiting_output_->value.begin;
      const bool last_is_nearer =
          last_input_ && std::abs(last_input_->value.begin - at) <= std::abs(half_cycle.value.begin - at);
      pair = join(last_is_nearer ? &*last_input_ : &half_cycle, &*waiting_output_);
      waiting_output_.reset();
    }
    last_input_ = half_cycle;
  } else {
    if (waiting_output_ && last_input_) pair = join(&*last_input_, &*waiting_output_);
    waiting_output_ = half_cycle;
  }
  return pair;
}

void PairMaker::restart() {
  last_input_.reset();
  waiting_output_.reset();
}

HalfCyclePair PairMaker::join(const HalfCycle* input, const HalfCycle* output) const {
  const HalfCycle& base = output != nullptr ? *output : *input;
  HalfCyclePair pair;
  pair.phase = base.channel.phase;
  pair.at = base.value.begin;
  pair.begin = base.begin;
  pair.elapsed_ns = base.elapsed_ns;
  pair.window_ns = base.window_ns;
  if (input != nullptr) pair.input_v = input->value.u_rms_v;
  if (output != nullptr) pair.output_v = output->value.u_rms_v;
  if (pair.input_v >= least_input_v_) pair.ratio = pair.output_v / pair.input_v;
  return pair;
}

}  // namespace tramline::regulator
