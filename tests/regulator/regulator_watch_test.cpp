#include "daemon/regulator/regulator_watch.hpp"

#include <gtest/gtest.h>

#include <cmath>

#include "tests/regulator/phases.hpp"

namespace tramline::regulator {
namespace {

using storage::EventKind;
using storage::Origin;
using namespace testing;
using ::testing::Test;

double step(double t, double at, double before, double after) {
  return t < at ? before : after;
}

// Ratio 220/188 = 1.17; a supply back at 220 V then gives about 257 V (common practice, no source).
TEST(Origin, AServoStuckAt117WhileTheSupplyRecoversFrom188To220IsTheRegulators) {
  const auto site = site_215_225();
  const Volts input = [](double t) { return step(t, 10.0, 188.0, 220.0); };
  const auto records = watched(
      site, input, [&](double t) { return 1.17 * input(t); }, 60.0);
  const auto excursions = ended(records, EventKind::out_of_band, Side::output);
  ASSERT_EQ(excursions.size(), 1U);
  EXPECT_EQ(excursions[0].origin, Origin::regulator);
  EXPECT_NEAR(excursions[0].extreme_v, 257.4, 0.1);
  EXPECT_NE(excursions[0].reason.find("the supply stood at 220 V"), std::string::npos)
      << excursions[0].reason;
  EXPECT_NE(excursions[0].reason.find("the ratio stayed at 1.17"), std::string::npos) << excursions[0].reason;
  const auto swells = ended(records, EventKind::swell, Side::output);
  ASSERT_EQ(swells.size(), 1U);
  EXPECT_EQ(swells[0].origin, Origin::regulator);
}

TEST(Origin, AnInputBeyondTheRangeIsTheSupplysAndTheReasonNamesTheBestPossibleOutput) {
  const auto site = site_215_225();
  const Volts input = [](double t) { return t >= 10.0 && t < 40.0 ? 131.0 : 220.0; };
  const auto records = watched(site, input, sound_servo(site, input, 60.0, 20.0), 60.0);
  const auto excursions = ended(records, EventKind::out_of_band, Side::output);
  ASSERT_GE(excursions.size(), 1U);
  EXPECT_EQ(excursions[0].origin, Origin::supply);
  EXPECT_NE(excursions[0].reason.find("fell to 131 V"), std::string::npos) << excursions[0].reason;
  EXPECT_NE(excursions[0].reason.find("180 V"), std::string::npos) << excursions[0].reason;
}

TEST(Origin, ADeepShortSagThatNoServoOfThisSpeedCouldFollowIsTheSupplys) {
  const auto site = site_215_225();
  const Volts input = [](double t) { return t >= 10.0 && t < 10.3 ? 180.0 : 220.0; };
  const auto records = watched(site, input, sound_servo(site, input, 30.0, 20.0), 30.0);
  const auto excursions = ended(records, EventKind::out_of_band, Side::output);
  ASSERT_GE(excursions.size(), 1U);
  for (const auto& e : excursions)
    EXPECT_EQ(e.origin, Origin::supply) << e.reason;
}

TEST(Origin, AnInterruptionOfBothSidesIsTheSupplys) {
  const auto site = site_215_225();
  const Volts both = [](double t) { return t >= 10.0 && t < 20.0 ? 0.0 : 220.0; };
  const auto records = watched(site, both, both, 30.0);
  const auto interruptions = ended(records, EventKind::interruption, Side::output);
  ASSERT_EQ(interruptions.size(), 1U);
  EXPECT_EQ(interruptions[0].origin, Origin::supply);
  EXPECT_NE(interruptions[0].reason.find("interrupted"), std::string::npos) << interruptions[0].reason;
}

TEST(Origin, AnOutputLostWithAHealthyInputIsTheRegulatorsOrWhatLiesBetweenTheSensors) {
  const auto site = site_215_225();
  const auto records = watched(
      site, [](double) { return 220.0; }, [](double t) { return t >= 10.0 && t < 15.0 ? 0.5 : 220.0; }, 30.0);
  const auto interruptions = ended(records, EventKind::interruption, Side::output);
  ASSERT_EQ(interruptions.size(), 1U);
  EXPECT_EQ(interruptions[0].origin, Origin::regulator);
  EXPECT_NE(interruptions[0].reason.find("between the two sensors"), std::string::npos)
      << interruptions[0].reason;
}

TEST(Origin, WithoutAnInputSensorItIsUndecidedAndSaysWhy) {
  auto site = site_215_225();
  site.channels.erase(site.channels.begin());
  const auto records = watched(
      site, nullptr, [](double t) { return t > 10.0 ? 240.0 : 220.0; }, 30.0);
  const auto excursions = ended(records, EventKind::out_of_band, Side::output);
  ASSERT_EQ(excursions.size(), 1U);
  EXPECT_EQ(excursions[0].origin, Origin::undecided);
  EXPECT_NE(excursions[0].reason.find("input is not measured"), std::string::npos);
}

TEST(RegulatorWatch, AnInputSagThatTheOutputDidNotShowIsHeldOff) {
  const auto site = site_215_225();
  const Volts input = [](double t) { return t >= 10.0 && t < 20.0 ? 190.0 : 220.0; };
  const auto held = watched(
      site, input, [](double) { return 220.0; }, 30.0);
  const auto sags = ended(held, EventKind::sag, Side::input);
  ASSERT_EQ(sags.size(), 1U);
  ASSERT_TRUE(sags[0].held_off.has_value());
  EXPECT_TRUE(*sags[0].held_off);

  const auto shown = watched(site, input, input, 30.0);
  ASSERT_EQ(ended(shown, EventKind::sag, Side::input).size(), 1U);
  EXPECT_FALSE(*ended(shown, EventKind::sag, Side::input)[0].held_off);
}

TEST(RegulatorWatch, AnOutputThatLeavesTheBandForLessThanTheGraceIsNoExcursion) {
  const auto site = site_215_225();
  const auto output = [](double seconds) {
    return [=](double t) { return t >= 10.0 && t < 10.0 + seconds ? 213.0 : 220.0; };
  };
  const Volts input = [](double) { return 220.0; };
  EXPECT_EQ(ended(watched(site, input, output(0.9), 30.0), EventKind::out_of_band, Side::output).size(), 0U);
  EXPECT_EQ(ended(watched(site, input, output(1.2), 30.0), EventKind::out_of_band, Side::output).size(), 1U);
}

TEST(RegulatorWatch, TenMinutesCountEveryHalfCycleOfBothSides) {
  const auto site = site_215_225();
  const Volts input = [](double t) { return step(t, 300.0, 200.0, 220.0); };
  const Volts output = [](double t) { return t < 60.0 ? 210.0 : t < 90.0 ? 230.0 : 220.0; };
  const auto intervals = records_of<storage::RegulatorInterval>(watched(site, input, output, 660.0));
  ASSERT_EQ(intervals.size(), 2U);
  const auto& first = intervals[0];
  EXPECT_EQ(first.begin.value, 0);
  EXPECT_EQ(first.end.value, 600 * kNsPerSecond);
  EXPECT_FALSE(first.partial);
  EXPECT_TRUE(intervals[1].partial);
  EXPECT_NEAR(static_cast<double>(first.output_half_cycles), 60000, 2);
  EXPECT_NEAR(static_cast<double>(first.output_low), 6000, 2);
  EXPECT_NEAR(static_cast<double>(first.output_high), 3000, 2);
  EXPECT_NEAR(static_cast<double>(first.output_in_band), 51000, 2);
  EXPECT_NEAR(static_cast<double>(first.input_in_band), 30000, 2);
  EXPECT_NEAR(static_cast<double>(first.correctable), 60000, 2);
  EXPECT_NEAR(first.ratio_max, 230.0 / 200.0, 1e-9);
}

TEST(RegulatorWatch, ABareSupplyCountsItsInputAgainstTheEventThresholds) {
  auto site = site_215_225();
  site.regulator.reset();
  site.channels.pop_back();
  const auto records = watched(
      site, [](double t) { return t < 100.0 ? 150.0 : 220.0; }, nullptr, 599.9);
  const auto intervals = records_of<storage::RegulatorInterval>(records);
  ASSERT_EQ(intervals.size(), 1U);
  EXPECT_NEAR(static_cast<double>(intervals[0].input_in_band), 49990, 2);
  EXPECT_EQ(intervals[0].output_half_cycles, 0);
  const auto sags = ended(records, EventKind::sag, Side::input);
  ASSERT_EQ(sags.size(), 1U);
  EXPECT_FALSE(sags[0].held_off.has_value());
}

}  // namespace
}  // namespace tramline::regulator
