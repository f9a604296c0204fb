#include "daemon/measure/sample_history.hpp"

#include <algorithm>
#include <array>
#include <bit>
#include <cassert>
#include <cmath>

#include "daemon/measure/lanes.hpp"

namespace tramline::measure {
namespace {

constexpr std::size_t kMostSamplesARow = 64;
constexpr double kFewestRowsACycle = 16.0;

/// Weights of a row under the rising half of the triangle, a plain sum less these being the falling half.
template <std::size_t kRow>
constexpr std::array<float, kRow> rising_weights() {
  std::array<float, kRow> weights{};
  for (std::size_t i = 0; i < kRow; ++i)
    weights[i] = (static_cast<float>(i) + 0.5F) / static_cast<float>(kRow);
  return weights;
}

/// The sums over one row, still in lanes.
struct RowLanes {
  Lanes sum{};
  Lanes rising{};
  Lanes energy{};
};
template <std::size_t kRow>
RowLanes add_up(const float* volts, const std::array<float, kRow>& weights) {
  RowLanes row;
  for (std::size_t i = 0; i < kRow; i += 4) {
    const Lanes v = load(volts + i);
    row.sum += v;
    row.rising += load(weights.data() + i) * v;
    row.energy += v * v;
  }
  return row;
}

/// Energies of the rows, and the decimated copy at the border before each; `rising` is carried from row to
/// row. Four rows at a time share the adding up of their lanes; each is summed in the same order all the
/// same.
template <std::size_t kRow>
void sum_rows(const float* volts, std::size_t rows, float* decimated, float* energies, float& rising) {
  static constexpr auto kWeights = rising_weights<kRow>();
  std::size_t r = 0;
  if constexpr (kRow >= 4) {
    for (; r + 4 <= rows; r += 4, volts += 4 * kRow) {
      const RowLanes a = add_up<kRow>(volts, kWeights);
      const RowLanes b = add_up<kRow>(volts + kRow, kWeights);
      const RowLanes c = add_up<kRow>(volts + 2 * kRow, kWeights);
      const RowLanes d = add_up<kRow>(volts + 3 * kRow, kWeights);
      const Lanes rise = sums_of(a.rising, b.rising, c.rising, d.rising);
      const Lanes before = __builtin_shufflevector(all(rising), rise, 0, 4, 5, 6);
      store(before + (sums_of(a.sum, b.sum, c.sum, d.sum) - rise), decimated + r);
      store(sums_of(a.energy, b.energy, c.energy, d.energy), energies + r);
      rising = rise[3];
    }
  }
  for (; r < rows; ++r, volts += kRow) {
    float row_sum = 0.0F;
    float row_rising = 0.0F;
    if constexpr (kRow < 4) {
      float energy = 0.0F;
      for (std::size_t i = 0; i < kRow; ++i) {
        row_sum += volts[i];
        row_rising += kWeights[i] * volts[i];
        energy += volts[i] * volts[i];
      }
      energies[r] = energy;
    } else {
      const RowLanes row = add_up<kRow>(volts, kWeights);
      row_sum = sum_of(row.sum);
      row_rising = sum_of(row.rising);
      energies[r] = sum_of(row.energy);
    }
    decimated[r] = rising + (row_sum - row_rising);
    rising = row_rising;
  }
}

void sum_rows(std::size_t row, const float* volts, std::size_t rows, float* decimated, float* energies,
              float& rising) {
  switch (row) {
    case 1:
      return sum_rows<1>(volts, rows, decimated, energies, rising);
    case 2:
      return sum_rows<2>(volts, rows, decimated, energies, rising);
    case 4:
      return sum_rows<4>(volts, rows, decimated, energies, rising);
    case 8:
      return sum_rows<8>(volts, rows, decimated, energies, rising);
    case 16:
      return sum_rows<16>(volts, rows, decimated, energies, rising);
    case 32:
      return sum_rows<32>(volts, rows, decimated, energies, rising);
    default:
      return sum_rows<kMostSamplesARow>(volts, rows, decimated, energies, rising);
  }
}

}  // namespace

std::size_t samples_per_row(double rate_hz, double nominal_hz) {
  std::size_t row = 1;
  while (row < kMostSamplesARow &&
         rate_hz / (nominal_hz * static_cast<double>(2 * row)) >= kFewestRowsACycle) {
    row *= 2;
  }
  return row;
}

SampleHistory::SampleHistory(std::size_t keep, std::size_t most_at_once, std::size_t samples_a_row)
    : row_(samples_a_row),
      row_shift_(std::countr_zero(samples_a_row)),
      samples_(keep + 2 * samples_a_row, most_at_once),
      decimated_(keep / samples_a_row + 2, most_at_once / samples_a_row + 1),
      row_energies_(keep / samples_a_row + 2, most_at_once / samples_a_row + 1) {
  assert(std::has_single_bit(samples_a_row) && samples_a_row <= kMostSamplesARow);
}

void SampleHistory::restart(SampleIndex first) {
  origin_ = first.value;
  samples_.restart(first.value);
  decimated_.restart(0);
  rising_ = 0.0F;
  row_energies_.restart(0);
}

void SampleHistory::append(std::span<const float> volts) {
  std::copy(volts.begin(), volts.end(), samples_.extend(volts.size()));
  const std::int64_t rows_done = decimated_.end();
  const auto rows = static_cast<std::size_t>(((samples_.end() - origin_) >> row_shift_) - rows_done);
  if (rows == 0) return;
  sum_rows(row_, samples_.at(origin_ + (rows_done << row_shift_)), rows, decimated_.extend(rows),
           row_energies_.extend(rows), rising_);
}

std::int64_t SampleHistory::row_of(SamplePosition at) const {
  return (static_cast<std::int64_t>(std::floor(at)) - origin_) >> row_shift_;
}

double SampleHistory::rows_energy(std::int64_t from, std::int64_t to) const {
  const float* row = row_energies_.at(from);
  const std::int64_t count = to - from;
  double sum[2] = {};
  std::int64_t i = 0;
  for (; i + 1 < count; i += 2) {
    sum[0] += static_cast<double>(row[i]);
    sum[1] += static_cast<double>(row[i + 1]);
  }
  if (i < count) sum[0] += static_cast<double>(row[i]);
  return sum[0] + sum[1];
}

std::array<double, 4> SampleHistory::squares_around(std::int64_t n) const {
  std::array<double, 4> squares{};
  if (n - 1 >= samples_.begin() && n + 2 < samples_.end()) {
    const float* volts = samples_.at(n - 1);
    for (std::size_t i = 0; i < 4; ++i)
      squares[i] = static_cast<double>(volts[i]);
  } else {  // at the ends of the stretch the last sample stands for those beyond
    for (std::int64_t i = 0; i < 4; ++i) {
      const std::int64_t at = std::clamp(n - 1 + i, samples_.begin(), samples_.end() - 1);
      squares[static_cast<std::size_t>(i)] = static_cast<double>(*samples_.at(at));
    }
  }
  for (double& square : squares)
    square *= square;
  return squares;
}

double SampleHistory::head(SamplePosition at) const {
  const auto n = static_cast<std::int64_t>(std::floor(at));
  const double phi = at - static_cast<double>(n);
  const std::int64_t row_begin = origin_ + (row_of(at) << row_shift_);

  double sums[2] = {};
  const float* volts = samples_.at(row_begin);
  for (std::int64_t i = 0; i < n - row_begin; ++i) {
    const double v = static_cast<double>(volts[i]);
    sums[i % 2] += v * v;
  }
  const double sum = sums[0] + sums[1];

  // Cubic (Catmull-Rom) through the squares around the end; its integral over a whole step is the trapezoid
  // with the first Euler-Maclaurin correction, so the whole steps need only the terms at the ends.
  const auto [f0, f1, f2, f3] = squares_around(n);
  const double slope1 = (f2 - f0) / 2.0;
  const double slope2 = (f3 - f1) / 2.0;
  const double c2 = 3.0 * (f2 - f1) - 2.0 * slope1 - slope2;
  const double c3 = 2.0 * (f1 - f2) + slope1 + slope2;
  const double fraction = phi * (f1 + phi * (slope1 / 2.0 + phi * (c2 / 3.0 + phi * c3 / 4.0)));
  return sum + f1 / 2.0 - slope1 / 12.0 + fraction;
}

}  // namespace tramline::measure
