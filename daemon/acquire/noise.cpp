#include "daemon/acquire/noise.hpp"

#include <cmath>
#include <numbers>

namespace tramline::acquire {

WhiteNoise::WhiteNoise(std::uint64_t seed, double rms) : random_(seed), silent_(!(rms > 0.0)) {
  Random filling(seed ^ 0x6e6f697365U);
  // Each value with its opposite, so that the noise has no mean.
  double power = 0.0;
  for (std::size_t i = 0; i < table_.size(); i += 2) {
    const double radius = std::sqrt(-2.0 * std::log(1.0 - filling.unit()));
    table_[i] = static_cast<float>(radius * std::cos(2.0 * std::numbers::pi * filling.unit()));
    table_[i + 1] = -table_[i];
    power += 2.0 * static_cast<double>(table_[i]) * static_cast<double>(table_[i]);
  }
  const double scale = rms / std::sqrt(power / static_cast<double>(table_.size()));
  for (float& value : table_)
    value = static_cast<float>(static_cast<double>(value) * scale);
}

void WhiteNoise::add_to(float* samples, std::size_t count) {
  if (silent_) return;
  for (std::size_t i = 0; i < count; i += 4) {
    const std::uint64_t bits = random_.next();
    for (std::size_t k = 0; k < 4; ++k)
      samples[i + k] += table_[(bits >> (16U * k)) & 0xfffU];
  }
}

}  // namespace tramline::acquire
