#pragma once

#include <cstddef>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/measure/block.hpp"

namespace tramline::acquire {

/// What a source says of itself once it is open.
struct StreamInfo {
  std::string what;                    ///< "WAV file mains.wav, 2 channels, 16 bit, 6400 Hz"
  double rate_hz = 0.0;                ///< samples a second of each channel
  UtcNs begin;                         ///< of sample 0; 0 if undated
  bool dated = true;                   ///< false: the recording has no time of its own and none was given
  std::optional<std::int64_t> frames;  ///< how many in all, if known
  std::vector<std::string> remarks;    ///< what a reader of the record ought to know, a sentence each
};

/// Where samples come from: opened by its own `open_…()` function, then read block by block.
///
/// A source scales to volts, puts channels in the site's order, and turns whatever is missing into a gap. It
/// knows nothing of measuring. One thread at a time.
class Source {
 public:
  virtual ~Source() = default;

  [[nodiscard]] virtual const StreamInfo& info() const = 0;

  /// Fills `block` with at most `most_frames` frames (at least one). false: the source has ended, and
  /// `end_remark()` says why. An Error: it could not be read on; what came before stands.
  virtual Result<bool> next(measure::Block& block, std::size_t most_frames) = 0;

  /// After the end: "end of file", "file ends in the middle of a record: 3 of 8 bytes", …
  [[nodiscard]] virtual std::string end_remark() const = 0;

  /// Share of the source read so far, 0 … 1, for a progress bar; 0 if it cannot know.
  [[nodiscard]] virtual double progress() const = 0;
};

}  // namespace tramline::acquire
