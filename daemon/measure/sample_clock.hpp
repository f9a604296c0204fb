#pragma once

#include <array>
#include <cstddef>
#include <cstdint>

#include "config/units.hpp"
#include "daemon/measure/block.hpp"
#include "daemon/measure/sample_history.hpp"

namespace tramline::measure {

/// Maps sample positions to UTC and to sample time, from the anchors that the source reports.
///
/// UTC may step at an anchor (the wall clock was set); sample time never does: it is the count of samples
/// over their rate, and every duration is a difference of it. Remembers the last 16 anchors, which spans the
/// measurement's delay with room to spare. One thread; allocates nothing.
class SampleClock {
 public:
  /// Sample 0 was taken at `begin`; samples come at `rate_hz` until an anchor says otherwise.
  SampleClock(UtcNs begin, double rate_hz);

  /// Takes an anchor; anchors come in order. Returns by how much UTC steps there against what was expected.
  std::int64_t anchor(const ClockAnchor& anchor);

  [[nodiscard]] UtcNs utc_of(SamplePosition at) const;
  /// Nanoseconds of sample time since sample 0.
  [[nodiscard]] std::int64_t elapsed_ns(SamplePosition at) const;
  /// The rate in force at the newest anchor.
  [[nodiscard]] double rate_hz() const { return newest().rate_hz; }

 private:
  struct Known {
    double at;
    std::int64_t utc_ns;
    std::int64_t elapsed_ns;
    double ns_a_sample;
    double rate_hz;
  };
  [[nodiscard]] const Known& newest() const { return known_[(count_ - 1) % known_.size()]; }
  [[nodiscard]] const Known& in_force(SamplePosition at) const;

  std::array<Known, 16> known_{};
  std::size_t count_ = 0;
};

}  // namespace tramline::measure
