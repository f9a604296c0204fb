#pragma once

#include <array>
#include <cstddef>
#include <optional>
#include <span>
#include <vector>

#include "daemon/measure/fundamental.hpp"

namespace tramline::measure {

/// One tick of a channel's half-cycle grid.
struct GridTick {
  SamplePosition at = 0.0;
  bool rising = false;
  bool measured = false;  ///< there is a zero crossing; false: free-running on the last good period
  bool steady = false;    ///< this tick and the two before it are measured and bound one undisturbed cycle
  bool extended = false;  ///< drawn beyond the first or the last crossing to the end of the stretch
  bool jump = false;      ///< the waveform jumped in phase here, or lost or gained samples
  double period = 0.0;    ///< the last good period, samples a cycle
};

/// Turns zero crossings into an unbroken grid of half cycles.
///
/// A crossing is taken if the fundamental is at least 2 % of nominal there and if it lies 0.3 to 0.85 of a
/// cycle after the tick before. A sudden change of amplitude shifts the crossings of the band-passed copy,
/// though not those of the voltage, and as a waveform fades or returns the filter's own ringing has crossings
/// too. So while the waveform is disturbed, for at most four cycles, the grid keeps the last good period: a
/// crossing near to where it is expected counts as being there, others are passed over. Where no crossing
/// comes, because the waveform is gone, the grid runs on with the last good period (the mean of the last four
/// undisturbed cycles or, on a supply so restless that there are none, of the last sixteen), so that an
/// interruption of any length has half-cycle values. At the begin of a stretch the first ticks wait, for up
/// to four cycles, until the period is known; then the grid is drawn backwards to the begin, so that no cycle
/// of a short recording is left out. One thread; allocates nothing.
class CycleGrid {
 public:
  /// `nominal_period` in samples; `nominal_v` r.m.s. Periods are believed within 15 % of nominal
  /// (IEC 61000-4-30:2015: 42.5 to 57.5 Hz and 51 to 69 Hz).
  CycleGrid(double nominal_period, double nominal_v);

  /// A new stretch begins at `origin`; the last good period is kept.
  void restart(SamplePosition origin);

  /// Takes the crossings found since the last call; none before `progress` is still to come. Appends ticks.
  void follow(std::span<const Crossing> crossings, SamplePosition progress, std::vector<GridTick>& out);

  /// The stretch ends at `end`: runs free up to it.
  void finish(SamplePosition end, std::vector<GridTick>& out);

  /// The last good period, samples a cycle; nominal before there was any.
  [[nodiscard]] double period() const { return period_; }

 private:
  void free_run_until(SamplePosition limit, std::vector<GridTick>& out);
  void run_on(std::vector<GridTick>& out);  // one free-running tick
  void take(const Crossing& crossing, std::vector<GridTick>& out);
  void end_start(std::vector<GridTick>& out);
  /// Whether ticks stand where the last good period expects them, rather than at every crossing that comes.
  [[nodiscard]] bool on_flywheel() const;
  [[nodiscard]] GridTick free_running_tick() const;  // at `last_`
  void remember(double period);

  double nominal_period_;
  double least_amplitude_v_;
  double period_;
  std::array<double, 4> good_{};
  std::size_t good_count_ = 0;

  struct Past {
    SamplePosition crossing;
    bool measured;
    bool moved;  // the tick stands where it was expected, not at the crossing
    double amplitude_v;
    double cycle;  // distance to the crossing two before, 0 if not known
  };
  std::array<Past, 2> past_{};  // the last tick and the one before
  std::size_t past_count_ = 0;
  int flywheel_ticks_ = 0;                   // moved or free-running since the last undisturbed cycle
  std::array<SamplePosition, 32> recent_{};  // the last crossings taken, 16 cycles
  std::size_t next_recent_ = 0;
  std::size_t unbroken_ = 0;  // crossings taken since the grid last ran free
  std::size_t restless_ = 0;  // ticks since the last undisturbed cycle
  bool seen_ = false;         // a crossing since the last tick, taken or not
  bool gone_ = false;         // no crossing between the last two ticks
  SamplePosition origin_ = 0.0;
  SamplePosition last_ = 0.0;  // the last tick, or the origin before there is one
  bool last_rising_ = false;

  bool starting_ = true;
  std::array<GridTick, 16> held_{};  // the first ticks, while starting
  std::size_t held_count_ = 0;
};

}  // namespace tramline::measure
