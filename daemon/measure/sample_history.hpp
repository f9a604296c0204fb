#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <span>

#include "config/units.hpp"
#include "daemon/measure/sliding_buffer.hpp"

namespace tramline::measure {

/// An instant between samples: the number of the sample before it plus the fraction passed since.
using SamplePosition = double;

/// How many samples a row has at `rate_hz`: the largest power of two that leaves at least 16 rows a nominal
/// cycle (so 8 at 6.4 kHz and 16 at 12.8 kHz, 50 Hz), at most 64, at least 1.
[[nodiscard]] std::size_t samples_per_row(double rate_hz, double nominal_hz);

/// The recent samples of one channel, with the sum of squares of each row of them and a decimated copy.
///
/// This is where the work per sample is done: one vectorised pass. Everything above works on rows and on the
/// few samples at a window's ends. Rows are counted from where the stretch began, so the result does not
/// depend on how the samples were cut into blocks. One thread. Allocates only when constructed.
class SampleHistory {
 public:
  /// Keeps at least the last `keep` samples; takes at most `most_at_once` in one `append()`.
  SampleHistory(std::size_t keep, std::size_t most_at_once, std::size_t samples_a_row);

  /// Begins a new stretch at sample `first`, after a gap or at the start.
  void restart(SampleIndex first);

  /// Adds samples in order. Afterwards the rows that they completed are there.
  void append(std::span<const float> volts);

  /// Integral of the squared voltage over [from, to), in V² times samples.
  ///
  /// The ends may fall between samples: the square is interpolated there by a cubic, and the sum is corrected
  /// as by Euler-Maclaurin, so the value for an exact period of a sampled sine does not depend on where it
  /// begins. Both ends must lie within the samples held.
  [[nodiscard]] double energy(SamplePosition from, SamplePosition to) const {
    return rows_energy(row_of(from), row_of(to)) + head(to) - head(from);
  }

  /// The pieces of `energy()`, for callers that use one end twice: the part of the integral between the begin
  /// of the row in which `at` lies and `at` itself, …
  [[nodiscard]] double head(SamplePosition at) const;
  /// … the sum of squares of the whole rows [from, to), …
  [[nodiscard]] double rows_energy(std::int64_t from, std::int64_t to) const;
  /// … and the row that holds a position.
  [[nodiscard]] std::int64_t row_of(SamplePosition at) const;

  [[nodiscard]] const SlidingBuffer<float>& samples() const { return samples_; }
  /// A decimated copy of the signal, low-passed by a triangle two rows long so that no harmonic folds onto
  /// the fundamental: element r is centred on the border between the rows r - 1 and r, that is half a sample
  /// before row r. In volts times samples a row.
  [[nodiscard]] const SlidingBuffer<float>& decimated() const { return decimated_; }
  [[nodiscard]] std::size_t samples_a_row() const { return row_; }
  /// The first sample of this stretch.
  [[nodiscard]] std::int64_t origin() const { return origin_; }

 private:
  /// The squares of the samples n - 1 … n + 2.
  [[nodiscard]] std::array<double, 4> squares_around(std::int64_t n) const;

  std::size_t row_;
  int row_shift_;
  std::int64_t origin_ = 0;
  SlidingBuffer<float> samples_;
  SlidingBuffer<float> decimated_;
  SlidingBuffer<float> row_energies_;
  float rising_ = 0.0F;  // the last row under the rising half of the triangle
};

}  // namespace tramline::measure
