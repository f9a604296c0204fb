#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "daemon/acquire/board/tramline_board.h"

/// A made-up board that sends through the reference sender: channel c counts 1000 (c + 1) + sample number
/// modulo 100.
namespace tramline::acquire {

inline tb_board made_up_board(std::uint8_t channels = 2, std::uint8_t bytes = 2) {
  tb_board board{};
  board.channels = channels;
  board.bytes = bytes;
  board.rate_mhz = 6'400'000;
  board.begin = 77;
  board.calibrated_day = 20'454;  // 2026-01-01
  board.type = "test board";
  board.serial = "0042";
  static const char* const kNames[TB_MOST_CHANNELS] = {"in", "out", "c", "d", "e", "f", "g", "h"};
  for (std::size_t c = 0; c < channels; ++c)
    board.channel[c] = {kNames[c], 0.5F, 2.0F, -32'768, 32'767};
  return board;
}

inline std::int32_t made_up_count(std::uint32_t sample, int channel) {
  return 1000 * (channel + 1) + static_cast<std::int32_t>(sample % 100);
}
/// volts = (count + 2) * 0.5
inline float made_up_volts(std::uint32_t sample, int channel) {
  return (static_cast<float>(made_up_count(sample, channel)) + 2.0F) * 0.5F;
}

using FrameBytes = std::vector<std::uint8_t>;

inline FrameBytes hello_of(tb_board& board) {
  FrameBytes bytes(1024);
  bytes.resize(tb_hello(&board, bytes.data(), bytes.size()));
  return bytes;
}

inline FrameBytes samples_of(tb_board& board, std::uint32_t first, std::uint16_t frames,
                             std::uint8_t over_range = 0, bool lost = false) {
  std::vector<std::int32_t> counts;
  for (std::uint32_t i = 0; i < frames; ++i) {
    for (int c = 0; c < board.channels; ++c)
      counts.push_back(made_up_count(first + i, c));
  }
  FrameBytes bytes(TB_MOST_PAYLOAD + TB_FRAME_EXTRA);
  bytes.resize(
      tb_samples(&board, first, counts.data(), frames, over_range, lost ? 1 : 0, bytes.data(), bytes.size()));
  return bytes;
}

inline void append(FrameBytes& to, const FrameBytes& more) {
  to.insert(to.end(), more.begin(), more.end());
}

}  // namespace tramline::acquire
