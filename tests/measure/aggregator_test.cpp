#include "daemon/measure/aggregator.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

#include "tests/measure/signals.hpp"

namespace tramline::measure {
namespace {

using storage::Interval;
using namespace testing;

constexpr double kSlowRate = 1600.0;  // enough for these, and quick
constexpr std::int64_t kTenMinutesNs = 600 * kNsPerSecond;

MeterOutput run(const Signal& signal, double seconds, UtcNs begin, double nominal_hz = 50.0) {
  return metered(site_of(kOneInput, 230.0, nominal_hz), {sampled(signal, seconds, kSlowRate)}, kSlowRate,
                 begin);
}

double step_at(double t, double at, double before, double after) {
  return t < at ? before : after;
}

// Root of the mean of the squares, not the mean: IEC 61000-4-30:2015, 4.5 (from memory); values computed.
TEST(Aggregator, TenBlocksAt230AndFiveAt220Make226_716) {
  const auto out = run([](double t) { return sine(step_at(t, 2.0, 230.0, 220.0), 50.0)(t); }, 3.5, {0});
  const auto three_seconds = aggregates_of(out, Interval::three_seconds);
  ASSERT_FALSE(three_seconds.empty());
  EXPECT_NEAR(three_seconds[0].u_rms_v, 226.71568, 0.02);
  EXPECT_EQ(three_seconds[0].blocks, 15);
  EXPECT_FALSE(three_seconds[0].partial);
}

TEST(Aggregator, TwentySecondsAtHalfVoltageInTenMinutesMake227_107) {
  const auto out = run(sine(230.0, 50.0, between(100.0, 120.0, 0.5, kSlowRate)), 620.0, {0});
  const auto ten_minutes = aggregates_of(out, Interval::ten_minutes);
  ASSERT_EQ(ten_minutes.size(), 2U);
  EXPECT_NEAR(ten_minutes[0].u_rms_v, 227.10681, 0.03);
  EXPECT_EQ(ten_minutes[0].blocks, 3000);
  EXPECT_FALSE(ten_minutes[0].partial);
  EXPECT_TRUE(ten_minutes[0].flagged);
  EXPECT_NEAR(ten_minutes[0].u_min_v, 115.0, 0.05);
  EXPECT_NEAR(ten_minutes[0].u_max_v, 230.0, 0.05);
  EXPECT_TRUE(ten_minutes[1].partial);
  EXPECT_FALSE(ten_minutes[1].flagged);
}

struct Overlap {
  double nominal_hz;
  double hz;
  int blocks;
};

// Blocks that begin in the ten minutes, the last one running over the tick: IEC 61000-4-30:2015, 4.5 (from
// memory).
TEST(Aggregator, ABlockUnderWayAtTheTenMinuteTickBelongsToTheOldInterval) {
  for (const Overlap& c :
       {Overlap{50.0, 50.02, 3002}, Overlap{50.0, 49.95, 2997}, Overlap{60.0, 60.05, 3003}}) {
    // Begin just before a tick, so that the first whole interval begins at one.
    const auto out = run(sine(230.0, c.hz), 605.0, UtcNs{kTenMinutesNs - 2 * kNsPerSecond}, c.nominal_hz);
    const auto ten_minutes = aggregates_of(out, Interval::ten_minutes);
    ASSERT_EQ(ten_minutes.size(), 3U) << c.hz;
    EXPECT_EQ(ten_minutes[1].begin.value, kTenMinutesNs);
    EXPECT_EQ(ten_minutes[1].end.value, 2 * kTenMinutesNs);
    EXPECT_NEAR(ten_minutes[1].blocks, c.blocks, 1) << c.hz;
    EXPECT_FALSE(ten_minutes[1].partial);
    EXPECT_NEAR(ten_minutes[1].u_rms_v, 230.0, 0.05);
  }
}

TEST(Aggregator, AThreeSecondIntervalUnderWayAtTheTickRunsToItsEndBesideTheNewSeries) {
  const auto out = run(sine(230.0, 50.0), 12.0, UtcNs{kTenMinutesNs - 4 * kNsPerSecond});
  std::vector<storage::Aggregate> overlapping;
  for (const auto& a : aggregates_of(out, Interval::three_seconds)) {
    if (a.begin.value < kTenMinutesNs && a.end.value > kTenMinutesNs) overlapping.push_back(a);
  }
  ASSERT_EQ(overlapping.size(), 1U);
  EXPECT_EQ(overlapping[0].blocks, 15);
  const auto all = aggregates_of(out, Interval::three_seconds);
  EXPECT_TRUE(std::any_of(all.begin(), all.end(), [](const auto& a) {
    return a.begin.value >= kTenMinutesNs && a.begin.value < kTenMinutesNs + 20 * kNsPerMillisecond &&
           a.blocks == 15;
  }));
}

TEST(Aggregator, AShortSagFlagsItsIntervalsAndNotTheirNeighbours) {
  const auto out = run(sine(230.0, 50.0, between(31.05, 31.15, 0.5, kSlowRate)), 60.0, {0});
  int flagged = 0;
  for (const auto& a : aggregates_of(out, Interval::three_seconds)) {
    const bool holds_it =
        a.begin.value < 31'150 * kNsPerMillisecond && a.end.value > 31'050 * kNsPerMillisecond;
    EXPECT_EQ(a.flagged, holds_it) << a.begin.value;
    flagged += a.flagged ? 1 : 0;
  }
  EXPECT_EQ(flagged, 1);
}

TEST(Aggregator, AnEventOnOneSideDoesNotFlagTheOther) {
  const std::vector<std::vector<float>> channels = {
      sampled(sine(230.0, 50.0, between(10.0, 10.2, 0.5, kSlowRate)), 20.0, kSlowRate),
      sampled(sine(230.0, 50.0), 20.0, kSlowRate)};
  const auto out = metered(site_of(kInputAndOutput), channels, kSlowRate);
  for (const auto& a : aggregates_of(out, Interval::three_seconds)) {
    EXPECT_TRUE(a.channel.side == Side::input || !a.flagged);
  }
  const auto all = aggregates_of(out, Interval::three_seconds);
  EXPECT_EQ(std::count_if(all.begin(), all.end(), [](const auto& a) { return a.flagged; }), 1);
}

TEST(Aggregator, TwelveTenMinuteValuesMakeTwoHoursOnTheEvenHour) {
  // 230 V for the first hour and 240 V for the second: 235.05319 V (computed).
  const auto out = run([](double t) { return sine(step_at(t, 3600.0, 230.0, 240.0), 50.0)(t); }, 7260.0, {0});
  const auto two_hours = aggregates_of(out, Interval::two_hours);
  ASSERT_EQ(two_hours.size(), 2U);
  EXPECT_NEAR(two_hours[0].u_rms_v, 235.05319, 0.02);
  EXPECT_EQ(two_hours[0].end.value, 7200 * kNsPerSecond);
  EXPECT_FALSE(two_hours[0].partial);
  EXPECT_TRUE(two_hours[1].partial);
}

TEST(Aggregator, AnIntervalBegunLateIsPartialAndSaysHowMuchWasMeasured) {
  const auto out = run(sine(230.0, 50.0), 650.0, UtcNs{kTenMinutesNs - 100 * kNsPerSecond});
  const auto ten_minutes = aggregates_of(out, Interval::ten_minutes);
  ASSERT_EQ(ten_minutes.size(), 2U);
  EXPECT_TRUE(ten_minutes[0].partial);
  EXPECT_NEAR(static_cast<double>(ten_minutes[0].measured_ns) / 1e9, 100.0, 0.3);
  EXPECT_TRUE(ten_minutes[1].partial);
}

}  // namespace
}  // namespace tramline::measure
