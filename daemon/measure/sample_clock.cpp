#include "daemon/measure/sample_clock.hpp"

#include <algorithm>
#include <cmath>

namespace tramline::measure {
namespace {

std::int64_t ns_after(double samples, double ns_a_sample) {
  // As std::llround(), but in line: this is asked for each half cycle of each channel several times.
  const double ns = samples * ns_a_sample;
  return static_cast<std::int64_t>(ns < 0.0 ? ns - 0.5 : ns + 0.5);
}

}  // namespace

SampleClock::SampleClock(UtcNs begin, double rate_hz) {
  known_[0] = {0.0, begin.value, 0, static_cast<double>(kNsPerSecond) / rate_hz, rate_hz};
  count_ = 1;
}

std::int64_t SampleClock::anchor(const ClockAnchor& anchor) {
  const auto at = static_cast<double>(anchor.at.value);
  const Known next{at, anchor.utc.value, elapsed_ns(at), static_cast<double>(kNsPerSecond) / anchor.rate_hz,
                   anchor.rate_hz};
  const std::int64_t step = anchor.utc - utc_of(at);
  known_[count_ % known_.size()] = next;
  ++count_;
  return step;
}

const SampleClock::Known& SampleClock::in_force(SamplePosition at) const {
  const std::size_t oldest = count_ - std::min(count_, known_.size());
  for (std::size_t i = count_; i-- > oldest + 1;) {
    const Known& known = known_[i % known_.size()];
    if (known.at <= at) return known;
  }
  return known_[oldest % known_.size()];
}

UtcNs SampleClock::utc_of(SamplePosition at) const {
  const Known& known = in_force(at);
  return {known.utc_ns + ns_after(at - known.at, known.ns_a_sample)};
}

std::int64_t SampleClock::elapsed_ns(SamplePosition at) const {
  const Known& known = in_force(at);
  return known.elapsed_ns + ns_after(at - known.at, known.ns_a_sample);
}

}  // namespace tramline::measure
