#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <deque>
#include <optional>
#include <vector>

#include "config/units.hpp"
#include "daemon/measure/cycle_grid.hpp"
#include "daemon/measure/flag_timeline.hpp"
#include "daemon/measure/half_cycle.hpp"
#include "daemon/measure/half_cycle_rms.hpp"
#include "daemon/measure/sample_clock.hpp"
#include "storage/records.hpp"

namespace tramline::measure {

/// 10/12-cycle values and what is made of them: 150/180 cycles (3 s), 10 min, 2 h (IEC
/// 61000-4-30:2015, 4.4, 4.5).
///
/// Block limits are those of one reference channel for all channels. At each 10-minute tick of UTC a new
/// series of blocks begins with the first half-cycle tick at or after it; the block then in progress, and the
/// 3-s interval in progress, run to their ends beside it (overlaps 1 and 2). A block belongs to the 10 min in
/// which it begins. Every aggregate is the root of the mean of the squares. A block is given out only when
/// every half-cycle value that begins in it has been seen, so that flags and extremes are complete. One
/// thread; allocates a little per block, nothing per sample.
class Aggregator {
 public:
  /// `cycles_a_block`: 10 at 50 Hz, 12 at 60 Hz.
  Aggregator(std::vector<Channel> channels, int cycles_a_block);

  /// The reference channel's next half-cycle tick; samples up to it are in the meters' histories.
  void reference_tick(const GridTick& tick, const SampleClock& clock,
                      const std::vector<HalfCycleRms>& meters);

  /// The next half-cycle value of any channel, in the order of their begins, after the event detectors have
  /// taken it.
  void take(const HalfCycle& half_cycle, const FlagTimeline& flags, std::vector<storage::Record>& out);

  /// The stretch ends after the values taken: what is complete is given out, a begun block is dropped. Longer
  /// intervals go on after the gap.
  void gap(const FlagTimeline& flags, std::vector<storage::Record>& out);

  /// No more will come: `gap()`, and the intervals in progress are given out as far as they go.
  void close(const FlagTimeline& flags, std::vector<storage::Record>& out);

  /// State of the clock, for the records to come.
  void clock_state(const storage::ClockState& state) { clock_state_ = state; }

  /// The begin of the oldest block not yet given out: flags before it will not be asked for. Infinite if
  /// none.
  [[nodiscard]] SamplePosition oldest_pending() const;

 private:
  struct Extremes {
    double low_v = storage::kNotMeasured;
    double high_v = storage::kNotMeasured;
    void take(double low, double high);
  };
  struct ChannelOfBlock {
    double mean_square = 0.0;
    bool over_range = false;
    Extremes extremes;
  };
  struct Block {
    std::int64_t series = 0;
    SamplePosition begin = 0.0;
    SamplePosition end = 0.0;
    bool complete = false;  // else `end` is not yet known
    UtcNs begin_utc;
    UtcNs end_utc;
    std::int64_t length_ns = 0;
    std::optional<std::int64_t> tick;  // number of the 10-minute interval it counts for, if any
    std::vector<ChannelOfBlock> channels;
  };
  /// A run of blocks, end to end, from one 10-minute tick to the next and, for its last 3 s, a little beyond.
  struct Series {
    std::int64_t number = 0;
    bool ending = false;  // a newer series has begun
    int half_cycles = 0;  // so far, of its block in progress
    int blocks = 0;       // so far, of its 3 s in progress
  };
  struct ChannelOfSum {
    double squares = 0.0;
    bool flagged = false;
    bool over_range = false;
    Extremes extremes;
  };
  /// An interval being filled, all channels.
  struct Sum {
    std::int64_t number = 0;  // of the series (3 s) or of the interval since 1970
    UtcNs begin;
    UtcNs end;
    std::int32_t inputs = 0;
    std::int32_t blocks = 0;
    std::int64_t measured_ns = 0;
    bool partial = false;
    std::vector<ChannelOfSum> channels;
  };

  void begin_block(Series& series, const GridTick& tick, const SampleClock& clock);
  void complete_block(const Series& series, const GridTick& tick, const SampleClock& clock,
                      const std::vector<HalfCycleRms>& meters);
  void give_out_until(SamplePosition seen, const FlagTimeline& flags, std::vector<storage::Record>& out);
  void give_out(const Block& block, const FlagTimeline& flags, std::vector<storage::Record>& out);
  void add(const Block& block, const std::vector<ChannelOfSum>& of_block, std::optional<Sum>& sum) const;
  void end_three_seconds(Sum& sum, std::vector<storage::Record>& out);
  void end_ten_minutes(std::vector<storage::Record>& out);
  void end_two_hours(std::vector<storage::Record>& out);
  void give_out(const Sum& sum, storage::Interval interval, std::vector<storage::Record>& out) const;

  std::vector<Channel> channels_;
  int half_cycles_a_block_;
  std::vector<Series> series_;  // the newest last; at most two
  std::int64_t series_begun_ = 0;
  std::optional<std::int64_t> tick_;  // the 10-minute interval of the newest series
  std::deque<Block> pending_;         // by begin
  std::vector<Sum> three_seconds_;    // one a series
  std::optional<Sum> ten_minutes_;
  std::optional<Sum> two_hours_;
  storage::ClockState clock_state_;
};

}  // namespace tramline::measure
