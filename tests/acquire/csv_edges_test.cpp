#include <gmock/gmock.h>

#include "tests/acquire/whole_stream.hpp"

namespace tramline::acquire {
namespace {

using measure::GapCause;
using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::IsEmpty;

config::RecordingSettings at_rate(std::string path, double rate_hz) {
  config::RecordingSettings settings;
  settings.path = std::move(path);
  settings.rate_hz = rate_hz;
  return settings;
}

/// Rows "time,value" at `rate_hz`, the value being the row's number.
std::string timed_rows(std::size_t rows, double rate_hz, int decimals = 6, double from_s = 0.0) {
  std::string text;
  char line[64];
  for (std::size_t i = 0; i < rows; ++i) {
    std::snprintf(line, sizeof line, "%.*f,%zu\n", decimals, from_s + static_cast<double>(i) / rate_hz, i);
    text += line;
  }
  return text;
}

TEST(CsvEdges, EachWayOfWritingATableGivesTheSameNumbers) {
  const RecordingFolder folder;
  const char* tables[] = {
      "in,out\n1.5,2.5\n-3,4e2\n",
      "1.5,2.5\n-3,4e2\n",
      "in;out\n1,5;2,5\n-3;4e2\n",
      "in;out\n1.5;2.5\n-3;4e2\n",
      "in\tout\n1,5\t2,5\n-3\t400\n",
      "\xEF\xBB\xBFin,out\r\n1.5,2.5\r\n-3,4e2\r\n",
      "# made by hand\nin,out\n# 2 rows\n1.5,2.5\n\n-3,4e2",
      "\"in\",\"out\"\n1.5, 2.5\n -3 ,+400\n",
  };
  for (const char* table : tables) {
    const Stream stream =
        read_recording(at_rate(folder.write("a.csv", table), 1000.0), {wanted("1"), wanted("2")});
    EXPECT_EQ(stream.error, "") << table;
    ASSERT_EQ(stream.volts.size(), 2U) << table;
    EXPECT_THAT(stream.volts[0], ElementsAre(1.5F, -3.0F)) << table;
    EXPECT_THAT(stream.volts[1], ElementsAre(2.5F, 400.0F)) << table;
    EXPECT_EQ(stream.info.rate_hz, 1000.0);
    EXPECT_FALSE(stream.info.dated);
    EXPECT_THAT(stream.gaps, IsEmpty());
    EXPECT_EQ(stream.end_remark, "end of file");
  }
}

TEST(CsvEdges, WithATimeColumnTheUnnamedChannelsAreThoseBesideIt) {
  const RecordingFolder folder;
  const Stream stream = read_recording(folder.write("a.csv", "t,in,out\n0,1,2\n0.001,3,4\n0.002,5,6\n"),
                                       {wanted(""), wanted("")});
  EXPECT_THAT(stream.volts[0], ElementsAre(1.0F, 3.0F, 5.0F)) << stream.error;
  EXPECT_THAT(stream.volts[1], ElementsAre(2.0F, 4.0F, 6.0F));
  EXPECT_NEAR(stream.info.rate_hz, 1000.0, 1e-6);
  EXPECT_FALSE(stream.info.dated) << "seconds from the begin are no date";
}

TEST(CsvEdges, AByteOrderMarkIsNoPartOfTheFirstName) {
  const RecordingFolder folder;
  const auto settings = at_rate(folder.write("a.csv", "\xEF\xBB\xBFu,v\n1,2\n"), 1000.0);
  EXPECT_THAT(read_recording(settings, {wanted("u")}).volts[0], ElementsAre(1.0F));
}

TEST(CsvEdges, TimesMayHaveADecimalCommaToo) {
  const RecordingFolder folder;
  const Stream stream =
      read_recording(folder.write("a.csv", "t;u\n0,000;1,5\n0,001;2,5\n0,002;3,5\n"), {wanted("u")});
  EXPECT_THAT(stream.volts[0], ElementsAre(1.5F, 2.5F, 3.5F)) << stream.error;
  EXPECT_NEAR(stream.info.rate_hz, 1000.0, 1e-6);
}

TEST(CsvEdges, LargeNumbersAreSecondsFrom1970) {
  const RecordingFolder folder;
  const Stream stream =
      read_recording(folder.write("a.csv", timed_rows(50, 1000.0, 6, 1772325000.0)), {wanted("")});
  EXPECT_TRUE(stream.info.dated) << stream.error;
  EXPECT_EQ(stream.info.begin.value, 1772325000'000'000'000);
  EXPECT_NEAR(stream.info.rate_hz, 1000.0, 0.01);
  EXPECT_EQ(stream.index.size(), 50U);
  EXPECT_THAT(stream.gaps, IsEmpty());
}

TEST(CsvEdges, RoundedStampsDoNotShiftTheRate) {
  // 6400 Hz is 156.25 us: stamps rounded to a microsecond step by 156 and 157.
  const RecordingFolder folder;
  const Stream stream = read_recording(folder.write("a.csv", timed_rows(6400, 6400.0)), {wanted("")});
  EXPECT_NEAR(stream.info.rate_hz, 6400.0, 0.1);
  EXPECT_EQ(stream.index.size(), 6400U);
  EXPECT_THAT(stream.gaps, IsEmpty());
}

TEST(CsvEdges, StampsAsCoarseAsTheSamplingAreRefused) {
  // 714.3 Hz with stamps of whole milliseconds: they step by 1, 1 and 2 ms, and yet nothing is missing.
  const RecordingFolder folder;
  const std::string path = folder.write("a.csv", timed_rows(3000, 714.3, 3));
  EXPECT_THAT(refusal(path, {wanted("")}), HasSubstr("unevenly"));
  EXPECT_EQ(read_recording(at_rate(path, 714.3), {wanted("2")}).index.size(), 3000U) << "the remedy it names";
}

TEST(CsvEdges, NowAndThenALostRowIsNotTakenForCoarseStamps) {
  const RecordingFolder folder;
  std::string text;
  std::size_t kept = 0;
  for (int i = 0; i < 4000; ++i) {
    if (i % 15 == 7) continue;
    ++kept;
    char line[64];
    std::snprintf(line, sizeof line, "%.6f,%d\n", i / 6400.0, i);
    text += line;
  }
  const Stream stream = read_recording(folder.write("a.csv", text), {wanted("")});
  EXPECT_NEAR(stream.info.rate_hz, 6400.0, 0.5) << stream.error;
  ASSERT_EQ(stream.index.size(), kept);
  for (std::size_t i = 0; i < kept; ++i)
    ASSERT_EQ(static_cast<float>(stream.index[i]), stream.volts[0][i]);
}

TEST(CsvEdges, AJumpOfTimeIsAGapOfTheRightLength) {
  const RecordingFolder folder;
  std::string text = timed_rows(100, 1000.0);
  text += timed_rows(50, 1000.0, 6, 0.5);
  config::RecordingSettings settings;
  settings.path = folder.write("a.csv", text);
  const Stream stream = read_recording(settings, {wanted("")});
  EXPECT_EQ(stream.index.size(), 150U) << stream.error;
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{100, 500, GapCause::time_jump}));
  ASSERT_FALSE(stream.anchors.empty());
  EXPECT_EQ(stream.anchors.front().at, 500);
  EXPECT_NEAR(static_cast<double>(stream.anchors.front().utc_ns), 0.5e9, 1e3);
  expect_independent_of_the_cut(settings, {wanted("")});
}

TEST(CsvEdges, OneLostRowIsAGapOfOne) {
  const RecordingFolder folder;
  std::string text = timed_rows(100, 1000.0);
  const std::string lost = "0.040000,40\n";
  text.erase(text.find(lost), lost.size());
  const Stream stream = read_recording(folder.write("a.csv", text), {wanted("")});
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{40, 41, GapCause::time_jump}));
  EXPECT_EQ(stream.index.back(), 99);
}

TEST(CsvEdges, TimeThatGoesBackwardsIsAnErrorWithItsLineAndWhatCameBeforeStands) {
  const RecordingFolder folder;
  config::RecordingSettings settings;
  settings.path =
      folder.write("back.csv", timed_rows(100, 1000.0) + "0.050000,7\n" + timed_rows(50, 1000.0, 6, 1.0));
  const Stream stream = read_recording(settings, {wanted("")}, 7);
  EXPECT_EQ(stream.index.size(), 100U);
  EXPECT_THAT(stream.error, HasSubstr("back.csv:101"));
  expect_independent_of_the_cut(settings, {wanted("")});
}

TEST(CsvEdges, WhatIsNoNumberIsAGapAndCounted) {
  const RecordingFolder folder;
  for (const char* nothing :
       {"", "nan", "NaN", "-nan", "inf", "n/a", "1e999", "1e60", "0x10", "12 V", "1.2.3", "--5"}) {
    config::RecordingSettings settings = at_rate(
        folder.write("a.csv", std::string("u,i\n1,1\n2,2\n") + nothing + ",3\n" + nothing + ",4\n5,\n6,6\n"),
        1000.0);
    const Stream stream = read_recording(settings, {wanted("u")});
    EXPECT_EQ(stream.error, "") << nothing;
    EXPECT_THAT(stream.volts[0], ElementsAre(1.0F, 2.0F, 5.0F, 6.0F)) << nothing;
    EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{2, 4, GapCause::not_a_number})) << nothing;
    EXPECT_THAT(stream.end_remark, HasSubstr("2 rows")) << nothing;
    expect_independent_of_the_cut(settings, {wanted("u")});
  }
}

TEST(CsvEdges, AGapAtTheBeginIsAGapToo) {
  const RecordingFolder folder;
  const Stream stream =
      read_recording(at_rate(folder.write("a.csv", "u\nnan\nnan\n3\n"), 1000.0), {wanted("u")});
  EXPECT_THAT(stream.index, ElementsAre(2));
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{0, 2, GapCause::not_a_number}));
}

TEST(CsvEdges, AnEndOfFileCharacterEndsTheFile) {
  const RecordingFolder folder;
  for (const char* end : {"\x1a", "\r\n\x1a", "\n\x1a\x1a\n"}) {
    const Stream stream =
        read_recording(at_rate(folder.write("a.csv", std::string("u\n1\n2") + end), 1000.0), {wanted("u")});
    EXPECT_THAT(stream.volts[0], ElementsAre(1.0F, 2.0F)) << stream.error << stream.end_remark;
  }
}

TEST(CsvEdges, ALineLongerThan64KiBIsAnError) {
  const RecordingFolder folder;
  for (const std::size_t length : {std::size_t{65600}, std::size_t{200000}, std::size_t{3000000}}) {
    const auto settings =
        at_rate(folder.write("a.csv", "u\n1\n" + std::string(length, '7') + "\n2\n"), 1000.0);
    auto source = open_recording(settings, {wanted("u")});
    const std::string text = source ? read_all(*source.value()).error : source.error().text();
    EXPECT_THAT(text, HasSubstr("64 KiB")) << length;
    EXPECT_THAT(text, HasSubstr("a.csv:3")) << length;
  }
}

TEST(CsvEdges, WhatCannotBeReadIsRefusedWithAReason) {
  const RecordingFolder folder;
  struct Case {
    const char* name;
    const char* text;
    std::optional<double> rate_hz;
    const char* says;
  };
  const Case cases[] = {
      {"empty", "", 1000.0, "empty"},
      {"only blank lines", "\n\n\r\n", 1000.0, "no rows"},
      {"only a header", "u,i\n", 1000.0, "no rows"},
      {"only comments", "# a\n# b\n", 1000.0, "no rows"},
      {"no time, no rate", "u,i\nabc,1\n", std::nullopt, "rate"},
      {"one row with time", "t,u\n0,1\n", std::nullopt, "rate"},
      {"time stands still", "t,u\n5,1\n5,1\n5,1\n", std::nullopt, "advance"},
      {"an hour a row", "t,u\n0,1\n3600,1\n7200,1\n", std::nullopt, "360 Hz to 1 MHz"},
      {"rate 0", "u\n1\n", 0.0, "360 Hz to 1 MHz"},
      {"rate negative", "u\n1\n", -1000.0, "360 Hz to 1 MHz"},
      {"rate no number", "u\n1\n", std::nan(""), "360 Hz to 1 MHz"},
      {"rate 2 MHz", "u\n1\n", 2e6, "360 Hz to 1 MHz"},
      {"instant without offset", "t,u\n2026-03-01T06:00:00,1\n2026-03-01T06:00:01,1\n", std::nullopt, "time"},
  };
  for (const Case& one : cases) {
    config::RecordingSettings settings;
    settings.path = folder.write("bad.csv", one.text);
    settings.rate_hz = one.rate_hz;
    const std::string text = refusal(settings, {wanted("")});
    EXPECT_THAT(text, HasSubstr(one.says)) << one.name;
    EXPECT_THAT(text, HasSubstr("bad.csv")) << one.name;
  }
  config::RecordingSettings settings;
  settings.path = folder.write("a.csv", "t,u\n0,1\n1,1\n");
  settings.time_column = "when";
  EXPECT_THAT(refusal(settings, {wanted("u")}), HasSubstr("when"));
}

TEST(CsvEdges, TimesThatLeapBeyondAllBoundsAreRefusedAndOverflowNothing) {
  const RecordingFolder folder;
  std::string text = timed_rows(100, 400.0);
  for (const char* seconds : {"2e9", "4e9", "6e9", "8e9", "1e10", "1.2e10"})
    text += std::string(seconds) + ",1\n";
  const Stream stream = read_recording(folder.write("a.csv", text), {wanted("")});
  EXPECT_GE(stream.index.size(), 100U);
  EXPECT_NE(stream.error, "");
}

TEST(CsvEdges, AnyBytesAreReadOrRefused) {
  const RecordingFolder folder;
  std::uint32_t seed = 1;
  for (int trial = 0; trial < 300; ++trial) {
    std::string text = "t;u;v\n";
    for (int i = 0; i < 200; ++i) {
      seed = seed * 1664525U + 1013904223U;
      static constexpr char kLetters[] = "0123456789.,;;\n\n-+eE \"#nan\t\r\x1a\xff";
      text += kLetters[(seed >> 16U) % (sizeof kLetters - 1)];
    }
    const std::string path = folder.write("fuzz.csv", text);
    read_recording(path, {wanted("")});
    read_recording(at_rate(path, 1000.0), {wanted(""), wanted("u")}, 3);
  }
}

}  // namespace
}  // namespace tramline::acquire
