#pragma once

#include <cassert>
#include <cstddef>
#include <cstdint>
#include <optional>
#include <span>
#include <vector>

#include "config/units.hpp"

namespace tramline::measure {

/// Why samples are missing before a block.
enum class GapCause : std::uint8_t {
  none,
  samples_lost,  ///< the source said that it lost samples
  not_a_number,  ///< the recording holds no number there
  time_jump,     ///< the recording's own time jumps
  rate_change,   ///< the sample rate changes by more than a few percent
  overrun,       ///< the device or this computer was too slow to take them
};

/// Why a source says the time of a sample anew.
enum class AnchorCause : std::uint8_t {
  clock_set,  ///< UTC itself stepped
  refined,    ///< the sample clock is known better by now
};

/// "Sample `at` was taken at `utc`, and from it on samples come at `rate_hz`."
struct ClockAnchor {
  SampleIndex at;
  UtcNs utc;
  double rate_hz = 0.0;
  AnchorCause cause = AnchorCause::clock_set;
};

/// Frames [first, first + frames) of the block's channel `channel` stood at the sensor's limit.
struct OverRangeSpan {
  std::size_t channel = 0;
  std::size_t first_frame = 0;
  std::size_t frames = 0;
};

/// A stretch of simultaneous samples in volts, planar: each channel's samples stand side by side.
///
/// Who fills it owns it and reuses it; `resize()` allocates only when it grows. Channels are in the site's
/// order. Of a polled meter a block holds one reading, and its frames are r.m.s. values instead (StreamInfo).
/// Samples are finite: a source turns anything else into a gap. A gap shows as a `first` beyond the end of
/// the block before; then `gap` names the cause.
struct Block {
  SampleIndex first;
  GapCause gap = GapCause::none;
  std::vector<OverRangeSpan> over_range;
  std::optional<ClockAnchor> anchor;  ///< if set, `anchor->at` is `first`

  /// Room for `channels` x `frames`; the samples are left as they are.
  void resize(std::size_t channels, std::size_t frames) {
    channels_ = channels;
    frames_ = frames;
    if (volts_.size() < channels * frames) volts_.resize(channels * frames);
  }
  /// Keeps the layout but forgets gap, over-range and anchor of the block before.
  void begin(SampleIndex at) {
    first = at;
    gap = GapCause::none;
    over_range.clear();
    anchor.reset();
  }
  [[nodiscard]] std::size_t channels() const { return channels_; }
  [[nodiscard]] std::size_t frames() const { return frames_; }
  [[nodiscard]] std::span<float> channel(std::size_t c) {
    assert(c < channels_);
    return {volts_.data() + c * frames_, frames_};
  }
  [[nodiscard]] std::span<const float> channel(std::size_t c) const {
    assert(c < channels_);
    return {volts_.data() + c * frames_, frames_};
  }

 private:
  std::size_t channels_ = 0;
  std::size_t frames_ = 0;
  std::vector<float> volts_;
};

}  // namespace tramline::measure
