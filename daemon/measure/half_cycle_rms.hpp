#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <deque>
#include <span>
#include <vector>

#include "config/units.hpp"
#include "daemon/measure/cycle_grid.hpp"
#include "daemon/measure/fundamental.hpp"
#include "daemon/measure/half_cycle.hpp"
#include "daemon/measure/sample_history.hpp"

namespace tramline::measure {

/// R.m.s. over one cycle, refreshed each half cycle (U_rms(1/2), IEC 61000-4-30:2015, 3 and 5.4.1), of one
/// channel.
///
/// A window begins at a zero crossing of the fundamental and is one cycle long: to the crossing after next
/// while the waveform is undisturbed, else the last good period. (A disturbance shifts the crossings of any
/// filtered copy a little; a shifted begin costs almost nothing, since the voltage is near zero there, but a
/// shifted length would.) While the waveform is gone the grid runs free, so a loss of voltage has values too.
///
/// Feed samples in order, any number at a time up to `most_at_once`; values come a little over two cycles
/// later. The same samples give the same values however they are cut. One channel, one thread; never throws;
/// allocates only when constructed and where an output vector has to grow.
class HalfCycleRms {
 public:
  /// `rate_hz`: samples a second, at least six a cycle; `nominal_hz` is 50 or 60; `nominal_v` is U_din.
  /// `keep`: samples of history that stay readable for others.
  HalfCycleRms(double rate_hz, double nominal_hz, double nominal_v, std::size_t keep,
               std::size_t most_at_once);

  /// A new stretch begins with sample `first`.
  void restart(SampleIndex first);

  /// The samples [from, to) stand at the sensor's limit. Call before feeding them.
  void over_range(std::int64_t from, std::int64_t to);

  /// Takes `volts`, which follow those before. Appends the half-cycle values that are complete to `values`,
  /// and the ticks of the half-cycle grid to `ticks`.
  void feed(std::span<const float> volts, std::vector<HalfCycleValue>& values, std::vector<GridTick>& ticks);

  /// The stretch ends here: appends what the samples still allow.
  void finish(std::vector<HalfCycleValue>& values, std::vector<GridTick>& ticks);

  /// Whether a sample in [from, to) stood at the sensor's limit (as far back as the history reaches).
  [[nodiscard]] bool touches_over_range(SamplePosition from, SamplePosition to) const;

  [[nodiscard]] const SampleHistory& history() const { return history_; }

 private:
  struct Edge;
  void value_at(const GridTick& tick, std::vector<HalfCycleValue>& values);
  /// The window that begins at the edge two ticks before `tick`.
  void add_value(const Edge& from, const GridTick& tick, std::vector<HalfCycleValue>& values) const;

  SampleHistory history_;
  FundamentalCrossings fundamental_;
  CycleGrid grid_;
  std::vector<Crossing> crossings_;

  /// The last two ticks with what the next values need of them.
  struct Edge {
    GridTick tick;
    double head;         // SampleHistory::head() at the tick
    std::int64_t row;    // the row it lies in
    double half_energy;  // from this tick to the next
  };
  std::array<Edge, 2> edges_{};  // the tick before the last, and the last
  std::size_t edge_count_ = 0;

  struct Limit {
    std::int64_t from;
    std::int64_t to;
  };
  std::deque<Limit> limits_;
};

}  // namespace tramline::measure
