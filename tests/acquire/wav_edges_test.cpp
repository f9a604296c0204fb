#include <gmock/gmock.h>

#include "tests/acquire/whole_stream.hpp"

// Layout of RIFF/WAVE and WAVE_FORMAT_EXTENSIBLE: from memory. The 24-bit bytes and their values are worked
// by hand.

namespace tramline::acquire {
namespace {

using measure::GapCause;
using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::IsEmpty;

struct Header {
  std::uint16_t tag = 1;
  std::uint16_t channels = 1;
  std::uint32_t rate_hz = 6400;
  std::uint16_t bits = 16;
};

std::string chunk(const std::string& id, const std::string& body) {
  return id + little(static_cast<std::uint32_t>(body.size())) + body +
         (body.size() % 2 == 1 ? std::string(1, '\0') : "");
}

std::string format_body(const Header& h) {
  const auto align = static_cast<std::uint16_t>(h.channels * h.bits / 8);
  return little(h.tag) + little(h.channels) + little(h.rate_hz) + little(h.rate_hz * align) + little(align) +
         little(h.bits);
}

std::string riff(const std::string& chunks) {
  return "RIFF" + little(static_cast<std::uint32_t>(chunks.size() + 4)) + "WAVE" + chunks;
}

std::string wav(const Header& h, const std::string& samples) {
  return riff(chunk("fmt ", format_body(h)) + chunk("data", samples));
}

std::string int16s(std::initializer_list<int> values) {
  std::string bytes;
  for (const int v : values)
    bytes += little(static_cast<std::int16_t>(v));
  return bytes;
}

TEST(WavEdges, VoltsAreRawPlusOffsetTimesScaleAndChannelsComeInTheOrderWanted) {
  const RecordingFolder folder;
  const std::string path =
      folder.write("a.wav", wav({1, 3, 6400, 16}, int16s({8192, 16384, -8192, 0, 4096, 24576})));
  const Stream stream = read_recording(path, {wanted("3", 100.0, 0.5), wanted("1", -2.0)});
  EXPECT_THAT(stream.volts[0], ElementsAre(25.0F, 125.0F));
  EXPECT_THAT(stream.volts[1], ElementsAre(-0.5F, 0.0F));
  const Stream in_order = read_recording(path, {wanted(""), wanted("")});
  EXPECT_THAT(in_order.volts[0], ElementsAre(0.25F, 0.0F));
  EXPECT_THAT(in_order.volts[1], ElementsAre(0.5F, 0.125F));
}

TEST(WavEdges, AChannelThatIsNotThereIsRefusedWithWhatThereIs) {
  const RecordingFolder folder;
  const std::string path = folder.write("a.wav", wav({1, 2, 6400, 16}, int16s({0, 0})));
  for (const char* name : {"3", "0", "-1", "left"}) {
    const std::string text = refusal(path, {wanted(name)});
    EXPECT_THAT(text, HasSubstr(name));
    EXPECT_THAT(text, HasSubstr("1, 2"));
  }
  EXPECT_NE(refusal(path, {wanted(""), wanted(""), wanted("")}), "");
}

TEST(WavEdges, FullScaleOfEitherSignIsOverRangeAndOneStepLessIsNot) {
  const RecordingFolder folder;
  const std::string path =
      folder.write("a.wav", wav({}, int16s({32767, 32766, -32768, -32767, -32766, 0, 32767, 32767})));
  for (const auto& channel :
       {wanted("", 500.0), wanted("", -500.0), wanted("", 325.27, 0.001), wanted("", -1.7, -0.2)}) {
    const Stream stream = read_recording(path, {channel});
    EXPECT_THAT(stream.over_range, ElementsAre(std::pair(0U, 0), std::pair(0U, 2), std::pair(0U, 3),
                                               std::pair(0U, 6), std::pair(0U, 7)))
        << channel.scale;
  }
}

TEST(WavEdges, FullScaleOfTwentyFourBitsIsSeenWhateverTheScale) {
  const RecordingFolder folder;
  const std::string path = folder.write(
      "a.wav", wav({1, 1, 6400, 24}, from_hex("FF FF 7F  00 00 00  00 00 80  01 00 80  00 FF 7F")));
  for (int i = 1; i < 200; ++i) {
    const Stream stream = read_recording(path, {wanted("", 3.7 * i, 0.001 * (i % 7))});
    ASSERT_THAT(stream.over_range, ElementsAre(std::pair(0U, 0), std::pair(0U, 2), std::pair(0U, 3))) << i;
  }
}

TEST(WavEdges, TheSensorsOwnRangeIsALimitToo) {
  const RecordingFolder folder;
  config::ChannelSettings channel = wanted("", 1000.0);
  channel.range_v = 400.0;
  const Stream stream =
      read_recording(folder.write("a.wav", wav({}, int16s({0, 16384, -16384, 13000}))), {channel});
  EXPECT_THAT(stream.over_range, ElementsAre(std::pair(0U, 1), std::pair(0U, 2)));
}

TEST(WavEdges, AFileCutShortGivesWhatIsThereAndSaysSo) {
  const RecordingFolder folder;
  std::string file = wav({1, 2, 6400, 16}, int16s({1, 2, 3, 4, 5, 6, 7, 8}));
  file.resize(file.size() - 5);
  const Stream stream =
      read_recording(folder.write("a.wav", file), {wanted("", 32768.0), wanted("", 32768.0)});
  EXPECT_THAT(stream.volts[0], ElementsAre(1.0F, 3.0F));
  EXPECT_THAT(stream.volts[1], ElementsAre(2.0F, 4.0F));
  EXPECT_THAT(stream.end_remark, HasSubstr("2 of 4 frames"));
  EXPECT_THAT(stream.end_remark, HasSubstr("cut short"));
}

TEST(WavEdges, NotANumberBecomesAGapAndIsCounted) {
  const RecordingFolder folder;
  const float nan = std::nanf("");
  std::string samples;
  for (const float v : {nan, 1.0F, 2.0F, nan, INFINITY, 3.0F, nan})
    samples += little_float(v);
  const std::string path = folder.write("a.wav", wav({3, 1, 6400, 32}, samples));
  const Stream stream = read_recording(path, {wanted("")});
  EXPECT_THAT(stream.volts[0], ElementsAre(1.0F, 2.0F, 3.0F));
  EXPECT_THAT(stream.index, ElementsAre(1, 2, 5));
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{0, 1, GapCause::not_a_number},
                                       Stream::Gap{3, 5, GapCause::not_a_number}));
  EXPECT_THAT(stream.end_remark, HasSubstr("4"));
  config::RecordingSettings settings;
  settings.path = path;
  expect_independent_of_the_cut(settings, {wanted("")});
}

TEST(WavEdges, ALongStretchOfNoNumbersIsPassedOverInOneGo) {
  const RecordingFolder folder;
  std::string samples = little_float(1.0F);
  for (int i = 0; i < 400000; ++i)
    samples += little_float(std::nanf(""));
  samples += little_float(2.0F);
  const Stream stream =
      read_recording(folder.write("a.wav", wav({3, 1, 6400, 32}, samples)), {wanted("")}, 1U << 20U);
  EXPECT_THAT(stream.index, ElementsAre(0, 400001));
}

TEST(WavEdges, NumbersAndNoNumbersInTurnAreRead) {
  const RecordingFolder folder;
  std::string samples;
  for (int i = 0; i < 200000; ++i)
    samples += little_float(i % 2 == 0 ? static_cast<float>(i) : std::nanf("")) + little_float(1.0F);
  const Stream stream = read_recording(folder.write("a.wav", wav({3, 2, 6400, 32}, samples)),
                                       {wanted("2"), wanted("1")}, 1U << 20U);
  EXPECT_EQ(stream.index.size(), 100000U);
  EXPECT_EQ(stream.volts[1].back(), 199998.0F);
  EXPECT_THAT(stream.end_remark, HasSubstr("100000 frames"));
}

TEST(WavEdges, BadHeadersAreRefusedWithFileAndReason) {
  const RecordingFolder folder;
  const std::string good = wav({}, int16s({1, 2}));
  struct Case {
    const char* name;
    std::string file;
    const char* says;
  };
  std::string huge_chunk = "RIFF" + little(100U) + "WAVE" + "junk" + little(0xfffffff0U);
  const Case cases[] = {
      {"empty", "", "empty"},
      {"other magic", "RIFX" + good.substr(4), "no WAV"},
      {"not wave", "RIFF" + little(4U) + "AVI " + good.substr(12), "no WAV"},
      {"cut in the magic", good.substr(0, 7), "no WAV"},
      {"cut before format", good.substr(0, 12), "header"},
      {"cut in format", good.substr(0, 30), "cut short"},
      {"cut before data", good.substr(0, 36), "header"},
      {"short format", riff(chunk("fmt ", "0123456789") + chunk("data", "ab")), "cut short"},
      {"data first", riff(chunk("data", "ab") + chunk("fmt ", format_body({}))), "before their format"},
      {"a chunk beyond the end", huge_chunk, "header"},
      {"no channels", wav({1, 0, 6400, 16}, ""), "channel"},
      {"8 bits", wav({1, 1, 6400, 8}, "ab"), "16, 24 or 32"},
      {"compressed", wav({2, 1, 6400, 16}, "ab"), "PCM"},
      {"rate 0", wav({1, 1, 0, 16}, "ab"), "360 Hz to 1 MHz"},
      {"rate 100", wav({1, 1, 100, 16}, "ab"), "360 Hz to 1 MHz"},
      {"rate 4e9", wav({1, 1, 4000000000U, 16}, "ab"), "360 Hz to 1 MHz"},
  };
  for (const Case& one : cases) {
    const std::string path = folder.write("bad.wav", one.file);
    const std::string text = refusal(path, {wanted("")});
    EXPECT_THAT(text, HasSubstr(one.says)) << one.name;
    EXPECT_THAT(text, HasSubstr("bad.wav")) << one.name;
  }
}

TEST(WavEdges, EveryTruncationOfAFileIsReadOrRefusedAndNeverInventsSamples) {
  const RecordingFolder folder;
  const std::string file = wav({1, 2, 6400, 16}, int16s({100, 200, 300, 400}));
  for (std::size_t size = 0; size < file.size(); ++size) {
    const Stream stream =
        read_recording(folder.write("cut.wav", file.substr(0, size)), {wanted("1", 32768.0)});
    const std::size_t whole_frames = size > 44 ? (size - 44) / 4 : 0;
    EXPECT_EQ(stream.index.size(), whole_frames) << size;
  }
}

TEST(WavEdges, SamplesDoNotDependOnHowTheyAreCut) {
  const RecordingFolder folder;
  std::string samples;
  for (int i = 0; i < 5000; ++i)
    samples +=
        little(static_cast<std::int16_t>(std::lround(33000.0 * std::sin(0.05 * i) * (i % 3 == 0 ? 1 : 0.9))));
  config::RecordingSettings settings;
  settings.path = folder.write("a.wav", wav({1, 2, 6400, 16}, samples));
  expect_independent_of_the_cut(settings, {wanted("2", 500.0), wanted("1", 400.0)});
}

}  // namespace
}  // namespace tramline::acquire
