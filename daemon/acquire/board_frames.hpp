#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <span>
#include <string>
#include <variant>
#include <vector>

/// Board frames, version 1: BOARD-FRAMES.md describes them byte by byte. Pure: bytes in, frames out.
namespace tramline::acquire {

struct BoardChannel {
  std::string name;
  float volts_per_count = 0.0F;
  float offset_counts = 0.0F;
  std::int32_t lowest = 0;
  std::int32_t highest = 0;
  friend bool operator==(const BoardChannel&, const BoardChannel&) = default;
};

/// What a board says of itself.
struct BoardHello {
  int bytes_a_sample = 0;  ///< 2, 3 or 4
  double rate_hz = 0.0;
  std::uint32_t begin = 0;  ///< differs after each start of the board
  std::uint32_t calibrated_day = 0;
  std::string type;
  std::string serial;
  std::vector<BoardChannel> channels;
  friend bool operator==(const BoardHello&, const BoardHello&) = default;
};

/// A stretch of samples; `bytes` are they, as they came, and hold only until the decoder is fed again.
struct BoardSamples {
  std::uint32_t first = 0;
  std::size_t frames = 0;
  std::uint8_t over_range = 0;
  bool lost_before = false;
  std::span<const std::uint8_t> bytes;
};

/// Finds frames in a stream of bytes that may begin anywhere and hold anything.
///
/// What is no sound frame is passed over and counted. A hello that makes no sense (no channels, no rate, a
/// scale that is no number) is no sound frame. One thread; holds at most one frame and a little more.
class BoardFrameDecoder {
 public:
  /// Takes bytes as they came. Call `next()` until it gives nothing before feeding again.
  void feed(std::span<const std::uint8_t> bytes);

  /// The next whole frame. A samples frame that fits no hello so far is passed over and counted.
  [[nodiscard]] std::optional<std::variant<BoardHello, BoardSamples>> next();

  /// Bytes that belonged to no sound frame.
  [[nodiscard]] std::int64_t refused_bytes() const { return refused_bytes_; }

  /// Forgets the bytes of an unfinished frame: what follows is not their continuation (a new datagram).
  void forget_rest();

 private:
  [[nodiscard]] std::optional<BoardHello> hello(std::span<const std::uint8_t> payload) const;
  [[nodiscard]] std::optional<BoardSamples> samples(std::span<const std::uint8_t> payload) const;
  void refuse(std::size_t bytes);

  std::vector<std::uint8_t> bytes_;
  std::size_t begin_ = 0;  // of what is not yet looked at
  std::int64_t refused_bytes_ = 0;
  std::size_t sample_bytes_ = 0;  // of one frame of all channels, by the last hello; 0: none yet
};

/// The count at `at`, of `bytes` little-endian signed bytes.
[[nodiscard]] std::int32_t board_count(const std::uint8_t* at, int bytes);

}  // namespace tramline::acquire
