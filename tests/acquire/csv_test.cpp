#include "daemon/acquire/csv.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "tests/acquire/files.hpp"

namespace tramline::acquire {
namespace {

using namespace testing;
using ::testing::ElementsAre;
using ::testing::HasSubstr;

using Csv = Recordings;

config::RecordingSettings at_rate(const std::string& path, double rate_hz) {
  auto settings = from(path);
  settings.rate_hz = rate_hz;
  return settings;
}

TEST_F(Csv, ColumnsAreFoundByNameAndByNumber) {
  const auto path = file("a.csv", "u_V,i_mA\n1.5,10\n-2.5,20\n");
  EXPECT_THAT(hear(at_rate(path, 2000), wanted({"u_V"})).volts[0], ElementsAre(1.5F, -2.5F));
  EXPECT_THAT(hear(at_rate(path, 2000), wanted({"2"})).volts[0], ElementsAre(10.0F, 20.0F));
  EXPECT_THAT(hear(at_rate(path, 2000), wanted({"u"})).error, HasSubstr("it has 1 (u_V), 2 (i_mA)"));
}

TEST_F(Csv, OffsetComesBeforeScale) {
  auto channels = wanted({"1"}, 100.0);
  channels[0].offset = -0.5;
  EXPECT_THAT(hear(at_rate(file("a.csv", "1.5\n2.0\n"), 2000), channels).volts[0],
              ElementsAre(100.0F, 150.0F));
}

TEST_F(Csv, SemicolonsDecimalCommasCommentsAndMarksAreUnderstood) {
  const auto heard = hear(
      at_rate(file("a.csv", "\xEF\xBB\xBF# a comment\r\nt;u\r\n0,0;1,5\r\n0,1;-2,5"), 2000), wanted({"u"}));
  EXPECT_THAT(heard.volts[0], ElementsAre(1.5F, -2.5F));
}

TEST_F(Csv, ATimeColumnGivesRateAndDate) {
  const auto path =
      file("a.csv",
           "utc,u\n2026-03-01T00:00:00.000Z,1\n2026-03-01T00:00:00.001Z,2\n2026-03-01T00:00:00.002Z,3\n"
           "2026-03-01T00:00:00.003Z,4\n");
  const auto heard = hear(from(path), wanted({""}));
  EXPECT_NEAR(heard.info.rate_hz, 1000.0, 0.01);
  EXPECT_TRUE(heard.info.dated);
  EXPECT_EQ(heard.info.begin.value, 1772323200LL * kNsPerSecond);
  EXPECT_THAT(heard.volts[0], ElementsAre(1.0F, 2.0F, 3.0F, 4.0F));
}

TEST_F(Csv, RelativeSecondsLeaveItUndatedUnlessABeginIsGiven) {
  const auto path = file("a.csv", "t_s,u\n0.000,1\n0.001,2\n0.002,3\n");
  EXPECT_FALSE(hear(from(path), wanted({"u"})).info.dated);
  auto settings = from(path);
  settings.begin = UtcNs{42};
  EXPECT_TRUE(hear(settings, wanted({"u"})).info.dated);
  EXPECT_EQ(hear(settings, wanted({"u"})).info.begin.value, 42);
}

TEST_F(Csv, AStepOfSeveralIntervalsIsAGapOfThatManySamples) {
  std::string text;
  for (int i = 0; i < 50; ++i)
    text += std::to_string(0.001 * (i < 20 ? i : i + 100)) + ",1\n";
  const auto heard = hear(from(file("a.csv", text)), wanted({"2"}));
  ASSERT_EQ(heard.gaps.size(), 1U);
  EXPECT_EQ(heard.gaps[0].first, 120);
  EXPECT_EQ(heard.gaps[0].gap, measure::GapCause::time_jump);
  ASSERT_EQ(heard.anchors.size(), 1U);
  EXPECT_EQ(heard.anchors[0].at.value, 120);
  EXPECT_NEAR(static_cast<double>(heard.anchors[0].utc.value), 0.120e9, 1e3);
}

TEST_F(Csv, TimeThatGoesBackwardsOrStandsStillIsRefusedWithItsLine) {
  EXPECT_THAT(
      hear(from(file("a.csv", "0.000,1\n0.001,2\n0.002,3\n0.003,4\n0.0015,5\n0.004,6\n")), wanted({"2"}))
          .error,
      HasSubstr("a.csv:5: the time goes backwards"));
  EXPECT_THAT(
      hear(from(file("b.csv", "0.000,1\n0.001,2\n0.002,3\n0.003,4\n0.003,5\n0.004,6\n")), wanted({"2"}))
          .error,
      HasSubstr("b.csv:5: the time does not advance"));
}

TEST_F(Csv, RowsBeforeAFaultAreGivenFirst) {
  const auto heard = hear(from(file("a.csv", "0.000,1\n0.001,2\n0.002,3\n0.001,4\n")), wanted({"2"}), 2);
  EXPECT_THAT(heard.volts[0], ElementsAre(1.0F, 2.0F, 3.0F));
  EXPECT_THAT(heard.error, HasSubstr("goes backwards"));
}

TEST_F(Csv, CellsThatAreNoNumberBecomeGaps) {
  for (const std::size_t cut : {1U, 3U, 1000U}) {
    const auto heard =
        hear(at_rate(file("a.csv", "1\n2\nNaN\n\"\"\nx\n6\ninf\n8\n1e99\n"), 2000), wanted({"1"}), cut);
    EXPECT_THAT(heard.volts[0], ElementsAre(1.0F, 2.0F, 6.0F, 8.0F));
    EXPECT_THAT(heard.indices, ElementsAre(0, 1, 5, 7));
    ASSERT_EQ(heard.gaps.size(), 2U);
    EXPECT_EQ(heard.gaps[0].gap, measure::GapCause::not_a_number);
    EXPECT_THAT(heard.end, HasSubstr("5 rows held no number"));
  }
}

TEST_F(Csv, ALastRowCutShortIsLeftOutAndSaid) {
  const auto heard = hear(at_rate(file("a.csv", "1,2\n3,4\n5"), 2000), wanted({"1"}));
  EXPECT_THAT(heard.volts[0], ElementsAre(1.0F, 3.0F));
  EXPECT_THAT(heard.end, HasSubstr("in the middle of a row"));
}

TEST_F(Csv, WhatCannotBeATableIsRefused) {
  EXPECT_THAT(hear(at_rate(file("a.csv", ""), 2000), wanted({"1"})).error, HasSubstr("the file is empty"));
  EXPECT_THAT(hear(at_rate(file("a.csv", "\n\n# only words\n"), 2000), wanted({"1"})).error,
              HasSubstr("no rows"));
  EXPECT_THAT(hear(at_rate(file("a.csv", "u\n"), 2000), wanted({"1"})).error,
              HasSubstr("header and no rows"));
  EXPECT_THAT(hear(at_rate(file("a.csv", "1,2\n3\n5,6\n"), 2000), wanted({"1"})).error,
              HasSubstr("a.csv:2: 1 columns, where the first row has 2"));
  EXPECT_THAT(hear(from(file("a.csv", "5\n6\n")), wanted({"1"})).error, HasSubstr("no sample rate is given"));
  EXPECT_THAT(hear(at_rate(file("a.csv", "1\n2\n"), 50), wanted({"1"})).error, HasSubstr("360 Hz to 1 MHz"));
  EXPECT_THAT(hear(from(file("a.csv", "0,1\n5,2\n10,3\n")), wanted({"2"})).error,
              HasSubstr("360 Hz to 1 MHz"));
  EXPECT_THAT(hear(at_rate(file("a.csv", std::string(200000, 'x')), 2000), wanted({"1"})).error,
              HasSubstr("more than 64 KiB"));
}

// R.m.s., rows and ends read independently by NumPy (genfromtxt).
TEST_F(Csv, AHouseholdRecordingReadsAsAnIndependentReaderReadsIt) {
  const std::string path = shared_data("household-230V-50hz/kettle.csv");
  if (path.empty()) GTEST_SKIP() << "the recordings beside the project are not here";
  const auto heard = hear(at_rate(path, 2000), wanted({"u_V"}));
  ASSERT_EQ(heard.volts[0].size(), 3000U);
  EXPECT_NEAR(heard.volts[0].front(), 24.37499, 1e-4);
  EXPECT_NEAR(heard.volts[0].back(), -103.6279, 1e-4);
  double energy = 0.0;
  for (const float v : heard.volts[0])
    energy += static_cast<double>(v) * static_cast<double>(v);
  EXPECT_NEAR(std::sqrt(energy / 3000.0), 233.97200940401342, 1e-4);
}

}  // namespace
}  // namespace tramline::acquire
