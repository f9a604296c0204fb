#pragma once

#include <cstdint>
#include <deque>
#include <optional>
#include <vector>

#include "config/units.hpp"
#include "daemon/measure/cycle_grid.hpp"
#include "daemon/measure/flag_timeline.hpp"
#include "daemon/measure/sample_clock.hpp"
#include "storage/records.hpp"

namespace tramline::measure {

/// Power frequency: the whole cycles counted in each 10 s of the absolute clock, divided by their time
/// (IEC 61000-4-30:2015, 5.1), on the reference channel.
///
/// Where fewer than 10 s were measured, at the begin, at the end and beside a gap, the value spans what there
/// is and says so by its begin and end. One thread; allocates little per 10 s, nothing per sample.
class FrequencyMeter {
 public:
  explicit FrequencyMeter(Side side) : side_(side) {}

  /// The reference channel's next half-cycle tick.
  void reference_tick(const GridTick& tick, const SampleClock& clock);

  /// Every event that begins before `seen` is in `flags`: gives out the values that end before it.
  void give_out_until(SamplePosition seen, const FlagTimeline& flags, std::vector<storage::Record>& out);

  /// The stretch ends: gives out everything.
  void finish(const FlagTimeline& flags, std::vector<storage::Record>& out);

  void clock_state(const storage::ClockState& state) { clock_state_ = state; }

  /// The begin of the oldest value not yet given out; infinite if none.
  [[nodiscard]] SamplePosition oldest_pending() const;

 private:
  /// Whole cycles from one upward crossing to another.
  struct Count {
    std::int64_t number = 0;  // of the 10 s since 1970
    SamplePosition first = 0.0;
    SamplePosition last = 0.0;
    UtcNs first_utc;
    UtcNs last_utc;
    std::int64_t first_elapsed_ns = 0;
    std::int64_t last_elapsed_ns = 0;
    std::int32_t cycles = 0;
    bool trusted = true;
    bool from_tick = false;  // the count begins with the 10 s
    bool to_tick = false;
  };
  void give_out(const Count& count, const FlagTimeline& flags, std::vector<storage::Record>& out) const;

  Side side_;
  std::optional<Count> counting_;
  std::optional<std::int64_t> last_number_;
  std::deque<Count> pending_;
  storage::ClockState clock_state_;
};

}  // namespace tramline::measure
