#pragma once

#include <array>
#include <limits>
#include <vector>

#include "config/units.hpp"
#include "daemon/measure/sample_history.hpp"

namespace tramline::measure {

/// When sags, swells and interruptions were under way on each side, for flagging (IEC 61000-4-30:2015, 4.7).
/// One thread.
class FlagTimeline {
 public:
  void began(Side side, SamplePosition at) { of(side).push_back({at, kOpen}); }
  void ended(Side side, SamplePosition began_at, SamplePosition at) {
    for (Stretch& stretch : of(side)) {
      if (stretch.begin == began_at && stretch.end == kOpen) {
        stretch.end = at;
        return;
      }
    }
  }
  /// Whether an event of `side` meets [from, to).
  [[nodiscard]] bool meets(Side side, SamplePosition from, SamplePosition to) const {
    for (const Stretch& stretch : stretches_[static_cast<std::size_t>(side)]) {
      if (stretch.begin < to && stretch.end > from) return true;
    }
    return false;
  }
  /// Nothing before `at` will be asked for any more.
  void forget_before(SamplePosition at) {
    for (auto& side : stretches_)
      std::erase_if(side, [at](const Stretch& s) { return s.end <= at; });
  }

 private:
  static constexpr SamplePosition kOpen = std::numeric_limits<double>::infinity();
  struct Stretch {
    SamplePosition begin;
    SamplePosition end;
  };
  std::vector<Stretch>& of(Side side) { return stretches_[static_cast<std::size_t>(side)]; }
  std::array<std::vector<Stretch>, 2> stretches_;
};

}  // namespace tramline::measure
