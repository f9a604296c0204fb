#include "daemon/acquire/wav.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <cstring>
#include <limits>

#include "tests/acquire/files.hpp"

namespace tramline::acquire {
namespace {

using namespace testing;
using ::testing::HasSubstr;

std::string le(std::uint64_t value, int bytes) {
  std::string out;
  for (int i = 0; i < bytes; ++i)
    out += static_cast<char>(value >> (8 * i) & 0xff);
  return out;
}

std::string format_chunk(int tag, int channels, int rate, int bits) {
  const int align = channels * bits / 8;
  return "fmt " + le(16, 4) + le(static_cast<std::uint64_t>(tag), 2) +
         le(static_cast<std::uint64_t>(channels), 2) + le(static_cast<std::uint64_t>(rate), 4) +
         le(static_cast<std::uint64_t>(rate * align), 4) + le(static_cast<std::uint64_t>(align), 2) +
         le(static_cast<std::uint64_t>(bits), 2);
}

std::string wav(const std::string& format, const std::string& data,
                std::uint64_t stated = std::numeric_limits<std::uint64_t>::max()) {
  const std::string chunks =
      "WAVE" + format + "data" +
      le(stated == std::numeric_limits<std::uint64_t>::max() ? data.size() : stated, 4) + data;
  return "RIFF" + le(chunks.size(), 4) + chunks;
}

std::string samples16(const std::vector<int>& values) {
  std::string out;
  for (const int v : values)
    out += le(static_cast<std::uint64_t>(v), 2);
  return out;
}

using Wav = Recordings;

TEST_F(Wav, SixteenBitsComeOutAsSharesOfFullScaleTimesTheScale) {
  const auto path =
      file("a.wav", wav(format_chunk(1, 2, 6400, 16), samples16({0, 16384, 1, -16384, -32767, 32767})));
  const auto heard = hear(from(path), wanted({"1", "2"}, 500.0));
  ASSERT_EQ(heard.volts.size(), 2U);
  EXPECT_FLOAT_EQ(heard.volts[0][1], 500.0F / 32768.0F);  // 15.2588 mV a step at 500 V full scale
  EXPECT_FLOAT_EQ(heard.volts[1][0], 250.0F);
  EXPECT_FLOAT_EQ(heard.volts[1][1], -250.0F);
  EXPECT_EQ(heard.over_range, 2);
  EXPECT_EQ(heard.info.frames, 3);
  EXPECT_FALSE(heard.info.dated);
  EXPECT_EQ(heard.end, "end of file");
}

// Bytes and values computed by hand from the format (two's complement, little-endian).
TEST_F(Wav, TwentyFourBitsAreSignExtended) {
  const std::string data =
      std::string("\x56\x34\x12", 3) + std::string("\xff\xff\xff", 3) + std::string("\x00\x00\x80", 3);
  const auto heard = hear(from(file("a.wav", wav(format_chunk(1, 1, 6400, 24), data))), wanted({"1"}));
  ASSERT_EQ(heard.volts[0].size(), 3U);
  EXPECT_NEAR(heard.volts[0][0], 0.142222166, 1e-7);
  EXPECT_NEAR(heard.volts[0][1], -1.0 / 8388608.0, 1e-12);
  EXPECT_FLOAT_EQ(heard.volts[0][2], -1.0F);
  EXPECT_EQ(heard.over_range, 1);
}

TEST_F(Wav, ThirtyTwoBitsAndExtensibleFormatsAreRead) {
  std::string extensible = "fmt " + le(40, 4) + le(0xfffe, 2) + le(1, 2) + le(8000, 4) + le(32000, 4) +
                           le(4, 2) + le(32, 2) + le(22, 2) + le(32, 2) + le(4, 4) + le(1, 2) +
                           std::string("\x00\x00\x00\x00\x10\x00\x80\x00\x00\xaa\x00\x38\x9b\x71", 14);
  const auto heard =
      hear(from(file("a.wav", wav(extensible, le(0x40000000, 4) + le(0xc0000000, 4)))), wanted({"1"}));
  ASSERT_EQ(heard.volts.size(), 1U) << heard.error;
  EXPECT_FLOAT_EQ(heard.volts[0][0], 0.5F);
  EXPECT_FLOAT_EQ(heard.volts[0][1], -0.5F);
}

TEST_F(Wav, FloatsThatAreNoNumberBecomeAGap) {
  std::string data;
  const float values[] = {1.0F, 2.0F, std::nanf(""), std::numeric_limits<float>::infinity(), 5.0F};
  for (const float v : values) {
    std::uint32_t bits = 0;
    std::memcpy(&bits, &v, 4);
    data += le(bits, 4);
  }
  for (const std::size_t cut : {1U, 2U, 1000U}) {
    const auto heard = hear(from(file("a.wav", wav(format_chunk(3, 1, 6400, 32), data))), wanted({"1"}), cut);
    EXPECT_EQ(heard.indices, (std::vector<std::int64_t>{0, 1, 4}));
    EXPECT_EQ(heard.volts[0], (std::vector<float>{1.0F, 2.0F, 5.0F}));
    ASSERT_EQ(heard.gaps.size(), 1U);
    EXPECT_EQ(heard.gaps[0].gap, measure::GapCause::not_a_number);
    EXPECT_THAT(heard.end, HasSubstr("2 frames held no number"));
  }
}

TEST_F(Wav, UnknownChunksAreSkippedAndOddOnesPadded) {
  const std::string odd = "LIST" + le(3, 4) + "abc" + '\0';
  const std::string content =
      "WAVE" + odd + format_chunk(1, 1, 6400, 16) + odd + "data" + le(2, 4) + samples16({7});
  const auto heard = hear(from(file("a.wav", "RIFF" + le(content.size(), 4) + content)), wanted({""}));
  ASSERT_EQ(heard.volts.size(), 1U) << heard.error;
  EXPECT_FLOAT_EQ(heard.volts[0][0], 7.0F / 32768.0F);
}

TEST_F(Wav, DataOfUnknownSizeGoesToTheEndOfTheFile) {
  for (const std::uint64_t stated : {0ULL, 0xffffffffULL}) {
    const auto heard = hear(
        from(file("a.wav", wav(format_chunk(1, 1, 6400, 16), samples16({1, 2, 3}), stated))), wanted({"1"}));
    EXPECT_EQ(heard.volts[0].size(), 3U);
    EXPECT_FALSE(heard.info.frames.has_value());
  }
}

TEST_F(Wav, ALongFileTakesItsSizeFromTheDs64Chunk) {
  const std::string ds64 = "ds64" + le(28, 4) + le(100, 8) + le(4, 8) + le(2, 8) + le(0, 4);
  const std::string content =
      "WAVE" + ds64 + format_chunk(1, 1, 6400, 16) + "data" + le(0xffffffff, 4) + samples16({1, 2, 99});
  const auto heard = hear(from(file("a.wav", "RF64" + le(0xffffffff, 4) + content)), wanted({"1"}));
  ASSERT_EQ(heard.volts.size(), 1U) << heard.error;
  EXPECT_EQ(heard.volts[0].size(), 2U);
}

TEST_F(Wav, ATruncatedFileGivesWhatItHasAndSaysSo) {
  const auto heard =
      hear(from(file("a.wav", wav(format_chunk(1, 2, 6400, 16), samples16({1, 2, 3, 4, 5}), 400))),
           wanted({"1", "2"}));
  EXPECT_EQ(heard.volts[0].size(), 2U);
  EXPECT_THAT(heard.end,
              HasSubstr("the file ends early: 2 of 100 frames are there, the last frame is cut short"));
}

TEST_F(Wav, ATimeGivenDatesIt) {
  auto settings = from(file("a.wav", wav(format_chunk(1, 1, 6400, 16), samples16({1}))));
  settings.begin = UtcNs{5};
  const auto heard = hear(settings, wanted({"1"}));
  EXPECT_TRUE(heard.info.dated);
  EXPECT_EQ(heard.info.begin.value, 5);
}

TEST_F(Wav, WhatIsNoWavFileIsRefusedWithItsPlace) {
  struct Bad {
    const char* what;
    std::string content;
    const char* says;
  };
  const Bad cases[] = {
      {"empty", "", "the file is empty"},
      {"text", "u_V,i_mA\n1,2\n", "this is no WAV file"},
      {"cut in the head", "RIFF\x10", "this is no WAV file"},
      {"no data", "RIFF" + le(30, 4) + "WAVE" + format_chunk(1, 1, 6400, 16),
       "ends before its samples begin"},
      {"data first", "RIFF" + le(30, 4) + "WAVE" + "data" + le(2, 4) + "ab", "before their format"},
      {"no channels", wav(format_chunk(1, 0, 6400, 16), "ab"), "no channels"},
      {"8 bits", wav(format_chunk(1, 1, 6400, 8), "ab"), "PCM of 16, 24 or 32 bits"},
      {"absurd rate", wav(format_chunk(1, 1, 50, 16), "ab"), "360 Hz to 1 MHz"},
      {"huge rate", wav(format_chunk(1, 1, 200000000, 16), "ab"), "360 Hz to 1 MHz"},
      {"short format", "RIFF" + le(30, 4) + "WAVE" + "fmt " + le(4, 4) + "abcd", "cut short"},
  };
  for (const Bad& bad : cases) {
    EXPECT_THAT(hear(from(file("a.wav", bad.content)), wanted({"1"})).error, HasSubstr(bad.says)) << bad.what;
  }
  const auto path = file("a.wav", wav(format_chunk(1, 2, 6400, 16), samples16({1, 2})));
  EXPECT_THAT(hear(from(path), wanted({"3"})).error,
              HasSubstr("there is no channel \"3\" in it; it has 1, 2"));
  EXPECT_THAT(hear(from((folder_ / "none.wav").string()), wanted({"1"})).error,
              HasSubstr("cannot be opened"));
}

// Frames, ends and r.m.s. read independently by Python's `wave` and NumPy.
TEST_F(Wav, AMainsRecordingFromASocketReadsAsAnIndependentReaderReadsIt) {
  const std::string path = shared_data("frequency-wav/whu_037_ref.wav");
  if (path.empty()) GTEST_SKIP() << "the recordings beside the project are not here";
  const auto heard = hear(from(path), wanted({"1"}, 32768.0));
  ASSERT_EQ(heard.volts[0].size(), 258801U);
  EXPECT_EQ(heard.info.rate_hz, 400.0);
  EXPECT_FLOAT_EQ(heard.volts[0][0], -4936.0F);
  EXPECT_FLOAT_EQ(heard.volts[0][2], -1041.0F);
  EXPECT_FLOAT_EQ(heard.volts[0].back(), 2212.0F);
  double sum = 0.0;
  double energy = 0.0;
  for (const float v : heard.volts[0]) {
    sum += static_cast<double>(v);
    energy += static_cast<double>(v) * static_cast<double>(v);
  }
  EXPECT_EQ(sum, 2155.0);
  EXPECT_NEAR(std::sqrt(energy / 258801.0), 3701.93068753348, 1e-6);
}

}  // namespace
}  // namespace tramline::acquire
