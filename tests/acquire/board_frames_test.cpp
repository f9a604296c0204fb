#include "daemon/acquire/board_frames.hpp"

#include <gtest/gtest.h>

#include <algorithm>
#include <limits>
#include <random>
#include <string>
#include <variant>
#include <vector>

#include "board_signal.hpp"

namespace tramline::acquire {
namespace {

/// Everything a decoder finds in `bytes`, fed `step` bytes at a time.
struct Found {
  std::vector<BoardHello> hellos;
  std::vector<std::uint32_t> firsts;
  std::vector<std::int32_t> counts;
  std::int64_t refused = 0;
};

Found decode(const FrameBytes& bytes, std::size_t step = 1'000'000) {
  Found found;
  BoardFrameDecoder decoder;
  for (std::size_t at = 0; at < bytes.size(); at += step) {
    decoder.feed(std::span(bytes).subspan(at, std::min(step, bytes.size() - at)));
    while (auto frame = decoder.next()) {
      if (auto* hello = std::get_if<BoardHello>(&*frame)) {
        found.hellos.push_back(*hello);
      } else {
        const auto& samples = std::get<BoardSamples>(*frame);
        found.firsts.push_back(samples.first);
        const int width = found.hellos.back().bytes_a_sample;
        for (std::size_t i = 0; i + static_cast<std::size_t>(width) <= samples.bytes.size();
             i += static_cast<std::size_t>(width))
          found.counts.push_back(board_count(&samples.bytes[i], width));
      }
    }
  }
  found.refused = decoder.refused_bytes();
  return found;
}

FrameBytes stream(tb_board& board, int frames) {
  FrameBytes bytes = hello_of(board);
  for (int i = 0; i < frames; ++i)
    append(bytes, samples_of(board, static_cast<std::uint32_t>(i) * 16, 16));
  return bytes;
}

TEST(BoardFrames, AreReadByTheDecoderAsTheReferenceSenderWroteThem) {
  for (const std::uint8_t width : std::vector<std::uint8_t>{2, 3, 4}) {
    tb_board board = made_up_board(3, width);
    const Found found = decode(stream(board, 5));
    ASSERT_EQ(found.hellos.size(), 1U);
    const BoardHello& hello = found.hellos[0];
    EXPECT_EQ(hello.bytes_a_sample, width);
    EXPECT_EQ(hello.rate_hz, 6400.0);
    EXPECT_EQ(hello.begin, 77U);
    EXPECT_EQ(hello.calibrated_day, 20'454U);
    EXPECT_EQ(hello.type, "test board");
    EXPECT_EQ(hello.serial, "0042");
    ASSERT_EQ(hello.channels.size(), 3U);
    EXPECT_EQ(hello.channels[1], (BoardChannel{"out", 0.5F, 2.0F, -32'768, 32'767}));
    EXPECT_EQ(found.firsts, (std::vector<std::uint32_t>{0, 16, 32, 48, 64}));
    ASSERT_EQ(found.counts.size(), 5U * 16U * 3U);
    for (std::size_t i = 0; i < found.counts.size(); ++i)
      EXPECT_EQ(found.counts[i], made_up_count(static_cast<std::uint32_t>(i / 3), static_cast<int>(i % 3)));
    EXPECT_EQ(found.refused, 0);
  }
}

TEST(BoardFrames, CarryTheCheckThatEthernetAndZlibUse) {
  // One sample, put together with Python's struct and its CRC-32 with zlib, so that sender and receiver
  // cannot be wrong together.
  tb_board board = made_up_board(1, 2);
  EXPECT_EQ(samples_of(board, 0x01020304, 1),
            (FrameBytes{0xA7, 0x4D, 0x01, 0x02, 0x0A, 0x00, 0x00, 0x00, 0x04, 0x03, 0x02,
                        0x01, 0x01, 0x00, 0x00, 0x00, 0x24, 0x04, 0xA2, 0xD7, 0x8F, 0xD1}));
}

TEST(BoardFrames, AreTheSameHoweverTheBytesAreCut) {
  tb_board board = made_up_board();
  const FrameBytes bytes = stream(board, 20);
  const Found whole = decode(bytes);
  for (const std::size_t step : {1U, 2U, 3U, 7U, 64U, 75U, 1000U}) {
    const Found cut = decode(bytes, step);
    EXPECT_EQ(cut.hellos, whole.hellos) << step;
    EXPECT_EQ(cut.counts, whole.counts) << step;
    EXPECT_EQ(cut.refused, 0) << step;
  }
}

TEST(BoardFrames, AreFoundAgainAfterGarbageEvenIfItLooksLikeAFrame) {
  tb_board board = made_up_board();
  FrameBytes bytes = {0x00, 0xA7, 0xA7, 0x4D, 0xFF};
  append(bytes, hello_of(board));
  // A head that announces a long frame: what it would swallow is looked through again.
  append(bytes, {0xA7, 0x4D, 0x01, 0x02, 0x00, 0x02, 0x00, 0x00});
  for (std::uint32_t i = 0; i < 20; ++i)
    append(bytes, samples_of(board, i * 16, 16));
  const Found found = decode(bytes, 5);
  EXPECT_EQ(found.hellos.size(), 1U);
  EXPECT_EQ(found.firsts.size(), 20U);
  EXPECT_EQ(found.refused, 5 + 8);
}

TEST(BoardFrames, WithAnyByteChangedAreRefusedAndTheirNeighboursTaken) {
  tb_board board = made_up_board(1, 2);
  const FrameBytes hello = hello_of(board);
  const FrameBytes before = samples_of(board, 0, 4);
  const FrameBytes changed = samples_of(board, 4, 4);
  const FrameBytes after = samples_of(board, 8, 4);
  for (std::size_t at = 0; at < changed.size(); ++at) {
    for (const std::uint8_t flip : std::vector<std::uint8_t>{0x01, 0x80, 0xFF}) {
      FrameBytes bytes = hello;
      append(bytes, before);
      append(bytes, changed);
      bytes[hello.size() + before.size() + at] ^= flip;
      append(bytes, after);
      // A changed length makes the decoder wait for a longer frame; more frames end the wait.
      for (std::uint32_t i = 0; i < 400; ++i)
        append(bytes, samples_of(board, 12 + 4 * i, 4));
      const Found found = decode(bytes);
      ASSERT_EQ(found.firsts.size(), 402U) << at;
      EXPECT_EQ(found.firsts[0], 0U);
      EXPECT_EQ(found.firsts[1], 8U);
      EXPECT_EQ(found.refused, static_cast<std::int64_t>(changed.size())) << at;
    }
  }
}

TEST(BoardFrames, NeitherCrashNorAppearFromNoise) {
  std::mt19937 random(5);
  FrameBytes noise(300'000);
  for (auto& byte : noise)
    byte = static_cast<std::uint8_t>(random() % 4 == 0 ? (random() % 2 == 0 ? 0xA7 : 0x4D) : random());
  const Found found = decode(noise, 977);
  EXPECT_TRUE(found.hellos.empty());
  EXPECT_GT(found.refused, 290'000);
}

TEST(BoardFrames, OfSamplesBeforeAnyHelloAreRefused) {
  tb_board board = made_up_board();
  FrameBytes bytes = samples_of(board, 0, 16);
  const auto length = static_cast<std::int64_t>(bytes.size());
  append(bytes, hello_of(board));
  append(bytes, samples_of(board, 16, 16));
  const Found found = decode(bytes);
  EXPECT_EQ(found.firsts, std::vector<std::uint32_t>{16});
  EXPECT_EQ(found.refused, length);
}

TEST(BoardFrames, WithAHelloThatMakesNoSenseAreRefused) {
  const auto refused = [](auto change) {
    tb_board board = made_up_board();
    change(board);
    const FrameBytes bytes = hello_of(board);
    const Found found = decode(bytes);
    return found.hellos.empty() && found.refused == static_cast<std::int64_t>(bytes.size()) && !bytes.empty();
  };
  EXPECT_TRUE(refused([](tb_board& b) { b.rate_mhz = 0; }));
  EXPECT_TRUE(refused([](tb_board& b) { b.channel[1].volts_per_count = 0.0F; }));
  EXPECT_TRUE(
      refused([](tb_board& b) { b.channel[1].volts_per_count = std::numeric_limits<float>::infinity(); }));
  EXPECT_TRUE(
      refused([](tb_board& b) { b.channel[0].offset_counts = std::numeric_limits<float>::quiet_NaN(); }));
  EXPECT_TRUE(refused([](tb_board& b) { b.channel[0].highest = b.channel[0].lowest; }));
  EXPECT_FALSE(refused([](tb_board&) {}));
}

TEST(BoardFrames, ShowNoControlCharactersOfABoardsNames) {
  tb_board board = made_up_board();
  board.type = "\x1b[31mred\n";
  const Found found = decode(hello_of(board));
  EXPECT_EQ(found.hellos.at(0).type, "?[31mred?");
}

TEST(BoardFrames, OfAKindFromLaterArePassedOver) {
  tb_board board = made_up_board();
  FrameBytes later = samples_of(board, 0, 1);
  later[3] = 9;  // the kind; the CRC below is made anew by the same rule as in the description
  std::uint32_t crc = 0xFFFFFFFFU;
  for (std::size_t i = 2; i + 4 < later.size(); ++i) {
    crc ^= later[i];
    for (int bit = 0; bit < 8; ++bit)
      crc = crc >> 1U ^ ((crc & 1U) != 0 ? 0xEDB88320U : 0U);
  }
  crc = ~crc;
  for (std::size_t i = 0; i < 4; ++i)
    later[later.size() - 4 + i] = static_cast<std::uint8_t>(crc >> (8 * i));
  FrameBytes bytes = hello_of(board);
  append(bytes, later);
  append(bytes, samples_of(board, 32, 16));
  const Found found = decode(bytes);
  EXPECT_EQ(found.firsts, std::vector<std::uint32_t>{32});
  EXPECT_EQ(found.refused, 0);
}

TEST(BoardFrames, AreNotWrittenWhereTheyDoNotFit) {
  tb_board board = made_up_board();
  FrameBytes small(20);
  const std::vector<std::int32_t> counts(10'000, 1);
  EXPECT_EQ(tb_hello(&board, small.data(), small.size()), 0U);
  EXPECT_EQ(tb_samples(&board, 0, counts.data(), 16, 0, 0, small.data(), small.size()), 0U);
  FrameBytes large(100'000);
  EXPECT_EQ(tb_samples(&board, 0, counts.data(), 2000, 0, 0, large.data(), large.size()), 0U);  // 8000 bytes
  board.channels = 9;
  EXPECT_EQ(tb_hello(&board, large.data(), large.size()), 0U);
}

TEST(BoardCount, IsSignedAndLittleEndian) {
  const std::uint8_t bytes[] = {0xFE, 0xFF, 0xFF, 0xFF};
  EXPECT_EQ(board_count(bytes, 2), -2);
  EXPECT_EQ(board_count(bytes, 3), -2);
  EXPECT_EQ(board_count(bytes, 4), -2);
  const std::uint8_t low[] = {0x00, 0x00, 0x80};
  EXPECT_EQ(board_count(low, 3), -8'388'608);
}

}  // namespace
}  // namespace tramline::acquire
