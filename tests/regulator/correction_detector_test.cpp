#include "daemon/regulator/correction_detector.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

#include "tests/regulator/phases.hpp"

namespace tramline::regulator {
namespace {

using namespace testing;

struct Seen {
  std::vector<storage::Correction> corrections;
  int reversals = 0;
};

Seen seen(const Volts& input, const Volts& output, double seconds) {
  const auto site = site_215_225();
  CorrectionDetector detector(*site.regulator, site.nominal_v);
  Seen result;
  const auto take = [&](std::optional<storage::Correction> correction) {
    if (!correction) return;
    result.corrections.push_back(*correction);
    result.reversals += detector.last_was_reversal() ? 1 : 0;
  };
  for (double t = 0.0; t < seconds; t += 0.01) {
    HalfCyclePair pair;
    pair.at = t * 6400.0;
    pair.begin = {std::llround(t * 1e9)};
    pair.elapsed_ns = pair.begin.value;
    pair.window_ns = 20 * kNsPerMillisecond;
    pair.input_v = input(t);
    pair.output_v = output(t);
    pair.ratio = pair.output_v / pair.input_v;
    take(detector.take(pair));
  }
  take(detector.restart());
  return result;
}

double ramp(double t, double from_t, double from, double to, double pace) {
  const double change = to - from;
  const double lasting = std::abs(change) / pace;
  return t <= from_t ? from : t >= from_t + lasting ? to : from + change * (t - from_t) / lasting;
}

// From 257.4 V to 225 V at S volts a second takes 32.4 V / S (elementary; handbook range of speeds, common
// practice).
TEST(CorrectionDetector, AMoveAtConstantSpeedIsOneCorrectionWithThatSpeed) {
  for (const double speed : {8.0, 10.0, 20.0, 35.0, 50.0}) {
    const auto result =
        seen([](double) { return 220.0; }, [&](double t) { return ramp(t, 2.0, 257.4, 225.0, speed); }, 10.0);
    ASSERT_EQ(result.corrections.size(), 1U) << speed;
    const auto& c = result.corrections[0];
    EXPECT_NEAR(c.ratio_before, 1.17, 0.001);
    EXPECT_NEAR(c.ratio_after, 225.0 / 220.0, 0.001);
    EXPECT_NEAR(c.speed_v_per_s, speed, 0.12 * speed);
    EXPECT_NEAR(static_cast<double>(c.end - c.begin) / 1e9, 32.4 / speed, 0.09);
  }
}

TEST(CorrectionDetector, AStepOfTheLoadIsNoCorrection) {
  const auto result =
      seen([](double) { return 220.0; }, [](double t) { return t < 2.0 ? 220.0 : 216.0; }, 5.0);
  EXPECT_TRUE(result.corrections.empty());
}

TEST(CorrectionDetector, ASupplyThatWandersUnderAStillServoIsNoCorrection) {
  const Volts input = [](double t) { return 200.0 + 15.0 * std::sin(t); };
  const auto result = seen(
      input, [&](double t) { return 1.1 * input(t); }, 20.0);
  EXPECT_TRUE(result.corrections.empty());
}

TEST(CorrectionDetector, AServoThatSwingsToAndFroReverses) {
  const Volts output = [](double t) { return 220.0 + 8.0 * std::sin(2.0 * std::numbers::pi * t / 2.0); };
  const auto result = seen([](double) { return 220.0; }, output, 20.0);
  EXPECT_NEAR(static_cast<double>(result.corrections.size()), 20.0, 2.0);
  EXPECT_NEAR(result.reversals, 19.0, 2.0);
}

}  // namespace
}  // namespace tramline::regulator
