#include "daemon/measure/frequency_meter.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <vector>

#include "tests/measure/signals.hpp"

namespace tramline::measure {
namespace {

using namespace testing;

std::vector<storage::Frequency> frequencies(const Signal& signal, double seconds, double nominal_hz = 50.0,
                                            UtcNs begin = {0}) {
  return records_of<storage::Frequency>(
      metered(site_of(kOneInput, 230.0, nominal_hz), {sampled(signal, seconds)}, kRate, begin));
}

struct Steady {
  double nominal_hz;
  double hz;
};

// Range: IEC 61000-4-30:2015, 5.1 (from memory); 2 mHz is this project's own tolerance.
TEST(FrequencyMeter, SteadyFrequenciesAreWithinTwoMillihertzOverTheRange) {
  for (const Steady& c : {Steady{50.0, 42.5}, Steady{50.0, 49.95}, Steady{50.0, 50.05}, Steady{50.0, 57.5},
                          Steady{60.0, 51.0}, Steady{60.0, 59.95}, Steady{60.0, 60.05}, Steady{60.0, 69.0}}) {
    const auto values = frequencies(sine(
                                        230.0, c.hz, [](double) { return 1.0; }, 35.0),
                                    31.0, c.nominal_hz);
    ASSERT_GE(values.size(), 3U);
    for (const auto& f : values) {
      EXPECT_NEAR(f.hz, c.hz, 0.002);
      EXPECT_TRUE(f.trusted);
      EXPECT_FALSE(f.flagged);
    }
  }
}

// Cycles that straddle the 10-s tick are left out (5.1, from memory; counts computed). First upward crossing
// 0.3 cycle after the tick.
TEST(FrequencyMeter, OnlyWholeCyclesWithinTheTenSecondsCount) {
  // The tick comes one second, 49.9 cycles, after the first sample.
  const auto values = frequencies(sine(
                                      230.0, 49.9, [](double) { return 1.0; }, -0.2 * 360.0),
                                  22.0, 50.0, UtcNs{9 * kNsPerSecond});
  ASSERT_GE(values.size(), 3U);
  EXPECT_EQ(values[1].begin.value, 10 * kNsPerSecond);
  EXPECT_EQ(values[1].cycles, 498);
  EXPECT_NEAR(values[1].hz, 49.9, 1e-4);
}

TEST(FrequencyMeter, ASlowRampGivesTheMeanOfEachTenSeconds) {
  // 49.5 to 50.5 Hz over 100 s: means 49.55, 49.65, …
  const auto ramp = [](double t) {
    return 325.0 * std::sin(2.0 * std::numbers::pi * (49.5 * t + 0.01 * t * t / 2.0));
  };
  const auto values = frequencies(ramp, 100.5);
  ASSERT_GE(values.size(), 10U);
  for (std::size_t i = 0; i < 10; ++i)
    EXPECT_NEAR(values[i].hz, 49.55 + 0.1 * static_cast<double>(i), 0.002) << i;
}

TEST(FrequencyMeter, TenSecondsInWhichTheWaveformWasGoneAreNotTrusted) {
  const auto values = frequencies(sine(230.0, 50.0, between(12.0, 13.0, 0.0)), 31.0);
  ASSERT_GE(values.size(), 3U);
  EXPECT_TRUE(values[0].trusted);
  EXPECT_FALSE(values[1].trusted);
  EXPECT_TRUE(values[1].flagged);
  EXPECT_TRUE(values[2].trusted);
}

TEST(FrequencyMeter, AJumpInPhaseMakesItsTenSecondsUntrustworthy) {
  const auto jumping = [](double t) {
    return sine(
        230.0, 50.0, [](double) { return 1.0; }, t < 15.0 ? 0.0 : 70.0)(t);
  };
  const auto values = frequencies(jumping, 31.0);
  ASSERT_GE(values.size(), 3U);
  EXPECT_TRUE(values[0].trusted);
  EXPECT_FALSE(values[1].trusted);
  EXPECT_TRUE(values[2].trusted);
}

TEST(FrequencyMeter, HarmonicsThatAddZeroCrossingsDoNotDisturbIt) {
  const auto wave = [](double t) {
    const double a = 2.0 * std::numbers::pi * 50.0 * t;
    return 325.0 *
           (std::sin(a) - 0.1 * std::sin(3.0 * a) - 0.1 * std::sin(5.0 * a) + 0.2 * std::sin(15.0 * a));
  };
  for (const auto& f : frequencies(wave, 21.0))
    EXPECT_NEAR(f.hz, 50.0, 0.001);
}

}  // namespace
}  // namespace tramline::measure
