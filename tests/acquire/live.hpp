#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <string>
#include <thread>
#include <vector>

#include "daemon/acquire/source.hpp"

/// Reads a live source in a test: asks again and again, without a clock, until what was awaited is there.
namespace tramline::acquire {

/// What a source gave, channel by channel.
struct Taken {
  std::vector<std::vector<float>> volts;
  std::vector<std::int64_t> index;  ///< of each frame
  std::vector<measure::GapCause> gaps;
  std::vector<measure::ClockAnchor> anchors;
  std::vector<std::int64_t> over_range;  ///< indices of frames with channel 0 at its limit
  std::optional<Error> error;
};

/// Waits until the source is ready or has failed.
inline std::optional<Error> await_ready(Source& source) {
  for (;;) {
    const auto ready = source.ready();
    if (!ready) return ready.error();
    if (ready.value()) return std::nullopt;
    std::this_thread::yield();
  }
}

/// Takes at least `frames` frames, or up to the Error.
inline void take(Source& source, std::size_t frames, Taken& taken, std::size_t most_a_block = 10'000) {
  measure::Block block;
  while (taken.index.size() < frames) {
    const auto more = source.next(block, most_a_block);
    if (!more) {
      taken.error = more.error();
      return;
    }
    if (block.frames() == 0) {
      std::this_thread::yield();
      continue;
    }
    taken.volts.resize(block.channels());
    if (block.gap != measure::GapCause::none) taken.gaps.push_back(block.gap);
    if (block.anchor) taken.anchors.push_back(*block.anchor);
    for (const auto& span : block.over_range) {
      for (std::size_t i = 0; span.channel == 0 && i < span.frames; ++i)
        taken.over_range.push_back(block.first.value + static_cast<std::int64_t>(span.first_frame + i));
    }
    for (std::size_t i = 0; i < block.frames(); ++i) {
      taken.index.push_back(block.first.value + static_cast<std::int64_t>(i));
      for (std::size_t c = 0; c < block.channels(); ++c)
        taken.volts[c].push_back(block.channel(c)[i]);
    }
  }
}

}  // namespace tramline::acquire
