#pragma once

#include <cstddef>
#include <cstdint>
#include <vector>

#include "daemon/measure/sample_history.hpp"
#include "daemon/measure/sliding_buffer.hpp"

namespace tramline::measure {

/// A zero crossing of the fundamental.
struct Crossing {
  SamplePosition at = 0.0;
  bool rising = false;
  double amplitude_v = 0.0;  ///< peak of the fundamental there, from the slope
};

/// Finds the zero crossings of the fundamental of one channel, whatever harmonics, d.c. and noise ride on it.
///
/// Works on the rows of a SampleHistory: a symmetric band-pass, two nominal cycles long (cosine under a Hann
/// window), has nulls at d.c. and at the harmonics and no phase of its own; crossings are refined by a cubic.
/// The answer comes one nominal cycle after the samples. One thread; allocates only when constructed.
class FundamentalCrossings {
 public:
  /// `most_rows_at_once`: the history's rows completed by one `append()`.
  FundamentalCrossings(double rate_hz, double nominal_hz, std::size_t samples_a_row,
                       std::size_t most_rows_at_once);

  /// Forgets the past: rows count from 0 at sample `origin`.
  void restart(std::int64_t origin);

  /// Takes the rows that `history` has completed since the last call; appends the crossings found.
  void follow(const SampleHistory& history, std::vector<Crossing>& out);

  /// Every crossing before this position has been given.
  [[nodiscard]] SamplePosition progress() const { return position_of(scanned_); }

 private:
  [[nodiscard]] SamplePosition position_of(std::int64_t border) const;

  std::size_t row_;
  double radians_a_row_;     // of the nominal fundamental
  std::vector<float> taps_;  // taps_[k]: weight of what lies k rows before and after the centre
  double gain_;              // of the filter at the nominal frequency
  std::int64_t origin_ = 0;
  SlidingBuffer<float> filtered_;  // by number of the row border at the centre
  std::int64_t scanned_ = 0;       // borders before this have been searched
};

}  // namespace tramline::measure
