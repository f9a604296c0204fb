#include "daemon/measure/polled_meter.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <string>
#include <variant>
#include <vector>

namespace tramline::measure {
namespace {

config::Site site() {
  config::Site site;
  site.nominal_v = 230.0;
  site.channels = {{{Side::input, Phase::l1}, "", 1.0, 0.0, 0.0},
                   {{Side::output, Phase::l1}, "", 1.0, 0.0, 0.0}};
  return site;
}

class Readings : public testing::Test {
 protected:
  Readings() : meter_(site_, {{}, 1000.0, "test began"}, 1.0) {}

  /// A reading of input and output at `s` seconds.
  void reading(double s, double input_v, double output_v) {
    block_.resize(2, 1);
    block_.begin({std::llround(s * 1000.0)});
    block_.channel(0)[0] = static_cast<float>(input_v);
    block_.channel(1)[0] = static_cast<float>(output_v);
    meter_.take(block_, out_);
  }
  template <class Record>
  std::vector<Record> all() const {
    std::vector<Record> found;
    for (const auto& record : out_.records) {
      if (const auto* one = std::get_if<Record>(&record)) found.push_back(*one);
    }
    return found;
  }
  std::vector<storage::Event> ended() const {
    std::vector<storage::Event> found;
    for (const EventMark& mark : out_.events) {
      if (mark.ended) found.push_back(mark.event);
    }
    return found;
  }

  config::Site site_ = site();
  PolledMeter meter_;
  Block block_;
  MeterOutput out_;
};

TEST_F(Readings, TenMinutesAreTheRootOfTheMeanOfTheSquares) {
  // Fact of arithmetic: 400 s at 230 V and 200 s at 220 V: sqrt((2 * 230^2 + 220^2) / 3) = 226.7157 V.
  for (int s = 0; s < 601; ++s)
    reading(s, s < 400 ? 230.0 : 220.0, 230.0);
  const auto aggregates = all<storage::Aggregate>();
  ASSERT_EQ(aggregates.size(), 2U);
  EXPECT_NEAR(aggregates[0].u_rms_v, 226.7157, 1e-4);
  EXPECT_EQ(aggregates[0].u_min_v, 220.0);
  EXPECT_EQ(aggregates[0].u_max_v, 230.0);
  EXPECT_EQ(aggregates[0].blocks, 600);
  EXPECT_EQ(aggregates[0].measured_ns, 600 * kNsPerSecond);
  EXPECT_FALSE(aggregates[0].partial);
  EXPECT_FALSE(aggregates[0].flagged);
  EXPECT_EQ(aggregates[0].interval, storage::Interval::ten_minutes);
}

TEST_F(Readings, TwoHoursAreMadeOfTheirTenMinutes) {
  for (int s = 0; s < 7200; ++s)
    reading(s, s < 3600 ? 230.0 : 240.0, 230.0);
  meter_.finish(storage::EventEnd::stopped, "stopped", out_);
  const auto aggregates = all<storage::Aggregate>();
  ASSERT_EQ(aggregates.size(), 26U);
  const auto& two_hours = aggregates[24];
  EXPECT_EQ(two_hours.interval, storage::Interval::two_hours);
  // Standards sheet 1.3: 6 x 230 V and 6 x 240 V give 235.05319 V.
  EXPECT_NEAR(two_hours.u_rms_v, 235.05319, 1e-5);
  EXPECT_FALSE(two_hours.partial);
  EXPECT_EQ(two_hours.blocks, 7200);
}

TEST_F(Readings, ASagIsSeenAsCoarselyAsTheReadingsAreApart) {
  for (int s = 0; s < 20; ++s)
    reading(s, s >= 5 && s < 8 ? 160.0 : 230.0, 230.0);
  const auto events = ended();
  ASSERT_EQ(events.size(), 1U);
  EXPECT_EQ(events[0].kind, storage::EventKind::sag);
  EXPECT_EQ(events[0].extreme_v, 160.0);
  EXPECT_EQ(events[0].duration_ns, 3 * kNsPerSecond);
  EXPECT_EQ(events[0].begin.value, 5 * kNsPerSecond);
}

TEST_F(Readings, AnEventFlagsItsTenMinutes) {
  for (int s = 0; s < 601; ++s)
    reading(s, s == 100 ? 160.0 : 230.0, 230.0);
  const auto aggregates = all<storage::Aggregate>();
  EXPECT_TRUE(aggregates[0].flagged);
  EXPECT_FALSE(aggregates[1].flagged);  // the output had no event
}

TEST_F(Readings, OneFailedReadingIsBridgedAndTwoAreAGap) {
  for (int s = 0; s < 20; ++s) {
    if (s != 5 && s != 10 && s != 11) reading(s, 230.0, 230.0);
  }
  meter_.finish(storage::EventEnd::stopped, "stopped", out_);
  const auto ends = all<storage::CoverageEnd>();
  ASSERT_EQ(ends.size(), 2U);
  EXPECT_EQ(ends[0].why, "readings failed for 3 s");
  EXPECT_EQ(ends[0].end.value, 10 * kNsPerSecond);
  EXPECT_EQ(ends[0].measured_ns, 10 * kNsPerSecond);
  EXPECT_EQ(ends[1].measured_ns, 8 * kNsPerSecond);
}

TEST_F(Readings, AnEventThatRunsIntoAGapSaysSo) {
  for (int s = 0; s < 20; ++s) {
    if (s < 8 || s > 14) reading(s, s >= 5 && s < 17 ? 160.0 : 230.0, 230.0);
  }
  const auto events = ended();
  ASSERT_EQ(events.size(), 2U);
  EXPECT_EQ(events[0].end_reason, storage::EventEnd::gap);
  EXPECT_EQ(events[1].end_reason, storage::EventEnd::recovered);
}

TEST_F(Readings, TenMinutesWithHolesArePartial) {
  for (int s = 0; s < 601; ++s) {
    if (s < 300 || s > 330) reading(s, 230.0, 230.0);
  }
  EXPECT_TRUE(all<storage::Aggregate>()[0].partial);
}

TEST_F(Readings, GivesNeitherThreeSecondValuesNorFrequencyNorWaveform) {
  for (int s = 0; s < 1300; ++s)
    reading(s, s == 100 ? 160.0 : 230.0, 230.0);
  meter_.finish(storage::EventEnd::stopped, "stopped", out_);
  EXPECT_TRUE(all<storage::Frequency>().empty());
  EXPECT_TRUE(all<storage::Waveform>().empty());
  for (const auto& aggregate : all<storage::Aggregate>())
    EXPECT_NE(aggregate.interval, storage::Interval::three_seconds);
}

}  // namespace
}  // namespace tramline::measure
