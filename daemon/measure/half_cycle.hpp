#pragma once

#include <cstddef>
#include <cstdint>

#include "config/units.hpp"
#include "daemon/measure/sample_history.hpp"

namespace tramline::measure {

/// One half-cycle value: r.m.s. over one cycle, refreshed each half cycle (U_rms(1/2), IEC
/// 61000-4-30:2015, 5.4.1). It stands for the instant at which its window begins.
struct HalfCycleValue {
  SamplePosition begin = 0.0;
  SamplePosition end = 0.0;  ///< one cycle later
  double u_rms_v = 0.0;
  bool free_running = false;  ///< no zero crossing: the window follows the last good period
  bool over_range = false;    ///< a sample in the window stood at the sensor's limit: a lower bound
};

/// A half-cycle value of one of the site's channels, placed in time.
struct HalfCycle {
  std::size_t channel_index = 0;  ///< in the site's order
  Channel channel;
  HalfCycleValue value;
  UtcNs begin;                  ///< time of `value.begin`
  std::int64_t elapsed_ns = 0;  ///< sample time of `value.begin` since the source was opened; never steps
  std::int64_t window_ns = 0;   ///< length of the window
};

}  // namespace tramline::measure
