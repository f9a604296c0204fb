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
  bool live = false;                   ///< samples come as time goes; a block may be empty
  /// Not 0: a polled meter, whose frames are r.m.s. readings this far apart, each a block of its own; the
  /// sample index counts milliseconds (`rate_hz` is 1000).
  double readings_every_s = 0.0;
};

/// How a live source has fared since it was opened.
struct StreamHealth {
  std::int64_t frames = 0;             ///< given out
  std::int64_t lost_frames = 0;        ///< the device said that it lost them, or they never came
  std::int64_t overrun_frames = 0;     ///< this computer did not take them in time
  std::int64_t over_range_frames = 0;  ///< with a channel at its limit
  std::int64_t refused_bytes = 0;      ///< came, but were no sound frame
  double rate_hz = 0.0;                ///< measured against the kernel's monotonic clock; 0: not yet measured
  double rate_error_ppm = 0.0;         ///< standard uncertainty of that
  std::int64_t time_error_ns = 0;  ///< bound on what the way from device to program adds to the error of time
};

/// Where samples come from: opened by its own `open_…()` function, then read block by block.
///
/// A source scales to volts, puts channels in the site's order, and turns whatever is missing into a gap. It
/// knows nothing of measuring. One thread at a time.
class Source {
 public:
  virtual ~Source() = default;

  [[nodiscard]] virtual const StreamInfo& info() const = 0;

  /// A live source connects while the caller goes on: false: not yet, ask again soon. Until it is true
  /// nothing but this may be asked. An Error: it cannot be opened.
  virtual Result<bool> ready() { return true; }

  /// Fills `block` with at most `most_frames` frames (at least one; a live source gives none when
  /// nothing has come since, and never waits). false: the source has ended, and `end_remark()` says why. An
  /// Error: it could not be read on; what came before stands.
  virtual Result<bool> next(measure::Block& block, std::size_t most_frames) = 0;

  /// After the end: "end of file", "file ends in the middle of a record: 3 of 8 bytes", …
  [[nodiscard]] virtual std::string end_remark() const = 0;

  /// Share of the source read so far, 0 … 1, for a progress bar; 0 if it cannot know.
  [[nodiscard]] virtual double progress() const = 0;

  [[nodiscard]] virtual StreamHealth health() const { return {}; }
};

}  // namespace tramline::acquire
