#include "daemon/measure/fundamental.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

#include "daemon/measure/lanes.hpp"

namespace tramline::measure {
namespace {

/// Where the cubic through y[-1], y[0], y[1], y[2] is zero in [0, 1], given that y[0] and y[1] differ in
/// sign; and its slope there.
struct Root {
  double at;
  double slope;
};
Root root_of_cubic(const float* y) {
  const double ym = static_cast<double>(y[-1]);
  const double y0 = static_cast<double>(y[0]);
  const double y1 = static_cast<double>(y[1]);
  const double y2 = static_cast<double>(y[2]);
  const double c1 = y1 - ym / 3.0 - y0 / 2.0 - y2 / 6.0;
  const double c2 = (ym + y1) / 2.0 - y0;
  const double c3 = (y2 - ym) / 6.0 + (y0 - y1) / 2.0;
  // One Newton step from the chord: a sine is nearly straight at its zero crossing, so what remains is below
  // 1e-5.
  const double chord = y0 / (y0 - y1);
  const double value = y0 + chord * (c1 + chord * (c2 + chord * c3));
  const double slope = c1 + chord * (2.0 * c2 + chord * 3.0 * c3);
  if (slope == 0.0) return {chord, y1 - y0};
  return {std::clamp(chord - value / slope, 0.0, 1.0), slope};
}

/// One output of the symmetric filter with `half` taps on each side.
float filter_one(const float* centre, const float* taps, std::ptrdiff_t half) {
  float sum = taps[0] * centre[0];
  for (std::ptrdiff_t k = 1; k <= half; ++k)
    sum += taps[k] * (centre[-k] + centre[k]);
  return sum;
}

/// Eight outputs side by side, each summed in the same order as by `filter_one()`.
void filter_eight(const float* centre, const float* taps, std::ptrdiff_t half, float* y) {
  Lanes low = all(taps[0]) * load(centre);
  Lanes high = all(taps[0]) * load(centre + 4);
  for (std::ptrdiff_t k = 1; k <= half; ++k) {
    const Lanes tap = all(taps[k]);
    low += tap * (load(centre - k) + load(centre + k));
    high += tap * (load(centre + 4 - k) + load(centre + 4 + k));
  }
  store(low, y);
  store(high, y + 4);
}

}  // namespace

FundamentalCrossings::FundamentalCrossings(double rate_hz, double nominal_hz, std::size_t samples_a_row,
                                           std::size_t most_rows_at_once)
    : row_(samples_a_row),
      radians_a_row_(2.0 * std::numbers::pi * nominal_hz * static_cast<double>(samples_a_row) / rate_hz),
      gain_(0.0),
      filtered_(8, most_rows_at_once) {
  const auto half = static_cast<std::size_t>(std::lround(2.0 * std::numbers::pi / radians_a_row_));
  std::vector<double> window(half);
  std::vector<double> wave(half);
  double window_sum = 0.0;
  double wave_sum = 0.0;
  for (std::size_t k = 0; k < half; ++k) {
    const double twice = k == 0 ? 1.0 : 2.0;
    window[k] = 0.5 + 0.5 * std::cos(std::numbers::pi * static_cast<double>(k) / static_cast<double>(half));
    wave[k] = window[k] * std::cos(radians_a_row_ * static_cast<double>(k));
    window_sum += twice * window[k];
    wave_sum += twice * wave[k];
  }
  // Where two cycles are no whole number of rows the null at d.c. has to be made.
  for (std::size_t k = 0; k < half; ++k) {
    const double tap = wave[k] - window[k] * wave_sum / window_sum;
    taps_.push_back(static_cast<float>(tap));
    gain_ += (k == 0 ? 1.0 : 2.0) * tap * std::cos(radians_a_row_ * static_cast<double>(k));
  }
  gain_ *= static_cast<double>(row_);  // the decimated copy is a sum over rows, not a mean
}

void FundamentalCrossings::restart(std::int64_t origin) {
  origin_ = origin;
  const auto half = static_cast<std::int64_t>(taps_.size()) - 1;
  // The first border has only one row beside it.
  filtered_.restart(half + 1);
  scanned_ = half + 2;
}

SamplePosition FundamentalCrossings::position_of(std::int64_t border) const {
  const auto size = static_cast<double>(row_);
  return static_cast<double>(origin_) + static_cast<double>(border) * size - 0.5;
}

void FundamentalCrossings::follow(const SampleHistory& history, std::vector<Crossing>& out) {
  const auto half = static_cast<std::int64_t>(taps_.size()) - 1;
  const SlidingBuffer<float>& decimated = history.decimated();
  const std::int64_t first = filtered_.end();
  const std::int64_t count = decimated.end() - half - first;
  if (count <= 0) return;

  float* y = filtered_.extend(static_cast<std::size_t>(count));
  const float* centre = decimated.at(first);
  std::int64_t i = 0;
  for (; i + 8 <= count; i += 8)
    filter_eight(centre + i, taps_.data(), half, y + i);
  for (; i < count; ++i)
    y[i] = filter_one(centre + i, taps_.data(), half);

  // A crossing lies between borders j and j + 1; the cubic needs j - 1 … j + 2.
  const std::int64_t end = filtered_.end() - 2;
  if (scanned_ >= end) return;
  const float* at = filtered_.at(scanned_);
  bool negative = at[0] < 0.0F;
  for (; scanned_ < end; ++scanned_, ++at) {
    const bool next_negative = at[1] < 0.0F;
    if (negative == next_negative) continue;
    negative = next_negative;
    const Root root = root_of_cubic(at);
    out.push_back({position_of(scanned_) + root.at * static_cast<double>(row_), !next_negative,
                   std::abs(root.slope) / (radians_a_row_ * gain_)});
  }
}

}  // namespace tramline::measure
