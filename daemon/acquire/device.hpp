#pragma once

#include <atomic>
#include <chrono>
#include <cstddef>
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "daemon/acquire/source.hpp"
#include "daemon/measure/block.hpp"

namespace tramline::acquire {

/// Frames as a device gave them, before anybody scaled them.
struct Arrival {
  std::int64_t first = 0;  ///< number of the first frame since the device was opened, lost ones counted
  std::size_t frames = 0;
  std::vector<float> values;  ///< frame by frame, a value each of the site's channels, in the device's unit
  measure::GapCause gap = measure::GapCause::samples_lost;  ///< why frames before `first` are missing, if so
  std::vector<measure::OverRangeSpan> over_range;           ///< `channel`: in the site's order
  std::int64_t monotonic_ns = 0;  ///< kernel's monotonic clock when the last of the frames was there
  std::int64_t utc_ns = 0;        ///< its UTC clock at the same instant

  /// Empties it and keeps its room.
  void clear() {
    frames = 0;
    values.clear();
    over_range.clear();
    gap = measure::GapCause::samples_lost;
  }
};

/// A live backend, as narrow as it can be: it opens, it gives frames with the time at which they were there,
/// and knows nothing of scales, clocks and measuring. LiveSource makes a Source of it.
///
/// One thread of its own: everything from `open()` to the end is called there, so it may wait for its device,
/// but never longer than it is told to. An Error ends it; LiveSource's owner opens a new one later.
class Device {
 public:
  virtual ~Device() = default;

  /// Opens the device and learns what it gives; `begin` of the result is left out. Looks at `stop` at least
  /// every 200 ms while it waits, and gives any Error then.
  virtual Result<StreamInfo> open(const std::atomic<bool>& stop) = 0;

  /// Waits for frames, at most `at_most`; then takes what is there into `arrival`, which is empty, and stamps
  /// it with `stamp()`. false: nothing came.
  virtual Result<bool> read(Arrival& arrival, std::chrono::milliseconds at_most) = 0;

  /// Bytes that came and were no sound frame, so far.
  [[nodiscard]] virtual std::int64_t refused_bytes() const { return 0; }

  /// Without a frame for so long, the source has failed.
  [[nodiscard]] virtual std::chrono::milliseconds patience() const { return std::chrono::seconds(5); }
};

/// Reads both of the kernel's clocks into `arrival`, as close together as can be.
void stamp(Arrival& arrival);

}  // namespace tramline::acquire
