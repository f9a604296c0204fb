#pragma once

#include <array>
#include <cstddef>
#include <cstdint>

namespace tramline::acquire {

/// Numbers that look random and are the same on every machine for the same seed (SplitMix64).
class Random {
 public:
  explicit Random(std::uint64_t seed) : state_(seed) {}
  std::uint64_t next() {
    state_ += 0x9e3779b97f4a7c15U;
    std::uint64_t z = state_;
    z = (z ^ (z >> 30U)) * 0xbf58476d1ce4e5b9U;
    z = (z ^ (z >> 27U)) * 0x94d049bb133111ebU;
    return z ^ (z >> 31U);
  }
  /// Uniform in [0, 1).
  double unit() { return static_cast<double>(next() >> 11U) * 0x1.0p-53; }

 private:
  std::uint64_t state_;
};

/// White noise for each sample: near enough to Gaussian, four values a random number.
class WhiteNoise {
 public:
  WhiteNoise(std::uint64_t seed, double rms);
  /// Adds noise to `count` samples, a multiple of four.
  void add_to(float* samples, std::size_t count);

 private:
  Random random_;
  std::array<float, 4096> table_{};  // Gaussian, of the r.m.s. asked for
  bool silent_;
};

}  // namespace tramline::acquire
