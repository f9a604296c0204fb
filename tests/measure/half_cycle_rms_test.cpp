#include "daemon/measure/half_cycle_rms.hpp"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <numbers>
#include <vector>

#include "tests/measure/signals.hpp"

namespace tramline::measure {
namespace {

using testing::between;
using testing::kRate;
using testing::sampled;
using testing::sine;

std::vector<HalfCycleValue> half_cycles(const std::vector<float>& volts, double nominal_hz = 50.0,
                                        double nominal_v = 230.0, double rate_hz = kRate) {
  HalfCycleRms meter(rate_hz, nominal_hz, nominal_v, 0, 4096);
  std::vector<HalfCycleValue> values;
  std::vector<GridTick> ticks;
  meter.restart({0});
  for (std::size_t i = 0; i < volts.size(); i += 1000) {
    meter.feed(std::span(volts).subspan(i, std::min<std::size_t>(1000, volts.size() - i)), values, ticks);
  }
  meter.finish(values, ticks);
  return values;
}

double worst_deviation(const std::vector<HalfCycleValue>& values, double expected_v) {
  double worst = 0.0;
  for (const auto& value : values)
    worst = std::max(worst, std::abs(value.u_rms_v - expected_v));
  return worst;
}

// Range and frequencies: IEC 61000-4-30:2015, class A (from memory); the tolerance is this project's own.
TEST(HalfCycleRms, SteadySinesAreWithinTwoHundredthsOfAPercentOverTheWholeRange) {
  for (const double nominal_hz : {50.0, 60.0}) {
    for (const double relative : {0.85, 0.9, 0.97, 0.999, 1.0, 1.0013, 1.05, 1.15}) {
      for (const double level : {0.10, 0.45, 0.80, 1.15, 1.50}) {
        const auto values = half_cycles(sampled(sine(230.0 * level, nominal_hz * relative), 2.0), nominal_hz);
        ASSERT_GT(values.size(), static_cast<std::size_t>(4.0 * nominal_hz * relative) - 4);
        EXPECT_LT(worst_deviation(values, 230.0 * level), 0.0002 * 230.0)
            << nominal_hz * relative << " Hz, " << level;
      }
    }
  }
}

TEST(HalfCycleRms, LowSampleRatesStillGiveTheRightValue) {
  for (const double rate_hz : {400.0, 800.0, 2000.0, 4096.0, 12800.0, 44100.0}) {
    const auto values = half_cycles(sampled(sine(230.0, 49.97), 2.0, rate_hz), 50.0, 230.0, rate_hz);
    ASSERT_GT(values.size(), 190U);
    EXPECT_LT(worst_deviation(values, 230.0), rate_hz < 1000.0 ? 0.6 : 0.02) << rate_hz;
  }
}

struct Distorted {
  const char* what;
  std::vector<std::pair<int, double>> harmonics;  // order, share; at 180 degrees
  double dc_v;
  double expected_v;
};

// Expected values: sqrt of the sum of squares (elementary); the first two are rows of IEC 62586-2-style
// recipe tables computed independently.
TEST(HalfCycleRms, HarmonicsAndDirectVoltageAddAsSquaresAndAddNoCrossings) {
  const Distorted cases[] = {
      {"10 % third", {{3, 0.10}}, 0.0, 231.147},
      {"third, fifth, seventh", {{3, 0.10}, {5, 0.08}, {7, 0.06}}, 0.0, 232.289},
      {"5 V direct voltage", {}, 5.0, 230.0543},
      {"flat top with extra crossings", {{3, 0.10}, {5, 0.10}, {15, 0.20}}, 0.0, 230.0 * std::sqrt(1.06)},
  };
  for (const Distorted& c : cases) {
    for (const double hz : {50.0, 49.5}) {
      const auto wave = [&](double t) {
        double volts = c.dc_v;
        const double angle = 2.0 * std::numbers::pi * hz * t;
        volts += 230.0 * std::numbers::sqrt2 * std::sin(angle);
        for (const auto& [order, share] : c.harmonics) {
          volts += share * 230.0 * std::numbers::sqrt2 * std::sin(order * angle + std::numbers::pi);
        }
        return volts;
      };
      const auto values = half_cycles(sampled(wave, 2.0));
      EXPECT_LT(worst_deviation(values, c.expected_v), 0.0002 * 230.0) << c.what << " at " << hz;
      EXPECT_NEAR(static_cast<double>(values.size()), 2.0 * 2.0 * hz, 4.0) << c.what;
    }
  }
}

TEST(HalfCycleRms, AnInterruptionOfAnyLengthHasValuesAtTheLastGoodPeriod) {
  const auto values = half_cycles(sampled(sine(230.0, 49.2, between(1.0, 4.0, 0.0)), 5.0));
  const double half_period = kRate / 49.2 / 2.0;
  std::size_t gone = 0;
  for (std::size_t i = 1; i < values.size(); ++i) {
    const double step = values[i].begin - values[i - 1].begin;
    EXPECT_GT(step, 0.5 * half_period);
    EXPECT_LT(step, 1.8 * half_period);
    if (values[i].u_rms_v < 1.0) {
      ++gone;
      if (values[i].free_running && values[i - 1].free_running) {
        EXPECT_NEAR(step, half_period, 0.001 * half_period);
      }
    }
  }
  EXPECT_NEAR(static_cast<double>(gone), 3.0 * 2.0 * 49.2, 4.0);
}

TEST(HalfCycleRms, NoiseWithoutMainsSetsNoCrossings) {
  std::uint32_t state = 1;
  const auto noise = [&](double) {  // uniform, 2 V r.m.s.
    state = state * 1664525U + 1013904223U;
    return (static_cast<double>(state) / 4294967296.0 - 0.5) * 2.0 * 2.0 * std::sqrt(3.0);
  };
  for (const auto& value : half_cycles(sampled(noise, 2.0))) {
    EXPECT_TRUE(value.free_running);
    EXPECT_NEAR(value.u_rms_v, 2.0, 0.6);
  }
}

// A waveform that jumps by 60 degrees, as in a fault of the network: a sound r.m.s. goes on.
TEST(HalfCycleRms, AJumpInPhaseLeavesTheValuesWhole) {
  const auto jumping = [](double t) {
    return sine(
        230.0, 50.0, [](double) { return 1.0; }, t < 1.0 ? 0.0 : 60.0)(t);
  };
  const auto values = half_cycles(sampled(jumping, 2.0));
  for (const auto& value : values) {
    const double from_jump = value.begin / kRate - 1.0;
    EXPECT_NEAR(value.u_rms_v, 230.0, from_jump > -0.025 && from_jump < 0.005 ? 60.0 : 0.05) << value.begin;
  }
}

// A supply that swings by 3 % at 13 Hz all the time, well off the nominal frequency.
TEST(HalfCycleRms, ARestlessSupplyIsMeasuredOverItsOwnPeriodToo) {
  const auto swinging = [](double t) { return 1.0 + 0.03 * std::sin(2.0 * std::numbers::pi * 13.0 * t); };
  const auto values = half_cycles(sampled(sine(230.0, 48.0, swinging), 6.0));
  double sum = 0.0;
  std::size_t count = 0;
  for (const auto& value : values) {
    if (value.begin < kRate) continue;
    EXPECT_NEAR((value.end - value.begin) / kRate, 1.0 / 48.0, 0.002 / 48.0);
    sum += value.u_rms_v * value.u_rms_v;
    ++count;
  }
  EXPECT_NEAR(std::sqrt(sum / static_cast<double>(count)), 230.0 * std::sqrt(1.0 + 0.03 * 0.03 / 2.0), 0.1);
}

TEST(HalfCycleRms, AShortRecordingIsMeasuredFromItsFirstCycleToItsLast) {
  const auto values = half_cycles(sampled(sine(230.0, 50.3), 0.3));
  ASSERT_FALSE(values.empty());
  EXPECT_LT(values.front().begin, kRate / 50.0 / 2.0);
  EXPECT_GT(values.back().end, 0.3 * kRate - kRate / 50.0 / 2.0 - 1.0);
  EXPECT_LT(worst_deviation(values, 230.0), 0.02);
}

// Recordings end at any point of the wave; nothing is read or drawn beyond their last sample.
TEST(HalfCycleRms, NoWindowReachesBeyondTheEndWhereverThatIs) {
  for (const double hz : {42.5, 47.0, 50.0, 57.5}) {
    for (double degrees = 0.0; degrees < 360.0; degrees += 15.0) {
      const auto volts = sampled(sine(
                                     23.0, hz, [](double) { return 1.0; }, degrees),
                                 2.0);
      HalfCycleRms meter(kRate, 50.0, 230.0, 0, 12800);
      std::vector<HalfCycleValue> values;
      std::vector<GridTick> ticks;
      meter.restart({0});
      meter.feed(volts, values, ticks);
      meter.finish(values, ticks);
      ASSERT_FALSE(values.empty());
      EXPECT_LE(values.back().end, static_cast<double>(volts.size()));
      EXPECT_GT(values.back().end, static_cast<double>(volts.size()) - 0.6 * kRate / hz);
      for (const GridTick& tick : ticks)
        EXPECT_LE(tick.at, static_cast<double>(volts.size()));
    }
  }
}

TEST(HalfCycleRms, SamplesAtTheSensorsLimitMarkTheWindowsThatHoldThem) {
  HalfCycleRms meter(kRate, 50.0, 230.0, 0, 4096);
  std::vector<HalfCycleValue> values;
  std::vector<GridTick> ticks;
  meter.restart({0});
  meter.over_range(1000, 1003);
  const auto volts = sampled(sine(230.0, 50.0), 0.5);
  meter.feed(volts, values, ticks);
  for (const auto& value : values)
    EXPECT_EQ(value.over_range, value.begin < 1003.0 && value.end > 1000.0);
  EXPECT_EQ(std::count_if(values.begin(), values.end(), [](const auto& v) { return v.over_range; }), 2);
}

}  // namespace
}  // namespace tramline::measure
