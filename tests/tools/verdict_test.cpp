#include "tools/verdict.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <nlohmann/json.hpp>

namespace tramline::tools {
namespace {

using storage::EventKind;
using storage::Origin;
using ::testing::HasSubstr;
using ::testing::Not;

constexpr std::int64_t kHourNs = 3600 * kNsPerSecond;

Evidence quiet_day() {
  Evidence evidence;
  evidence.site.name = "Test site";
  evidence.site.zone = "Asia/Kolkata";
  evidence.site.nominal_v = 220.0;
  for (const Side side : {Side::input, Side::output}) {
    config::ChannelSettings channel;
    channel.channel = {side, Phase::l1};
    evidence.site.channels.push_back(channel);
  }
  config::RegulatorSettings regulator;
  regulator.target_v = 220.0;
  regulator.band_low_v = 215.0;
  regulator.band_high_v = 225.0;
  regulator.ratio_min = 0.8;
  regulator.ratio_max = 1.4;
  evidence.site.regulator = regulator;
  evidence.source = "test";
  evidence.coverage.push_back({UtcNs{0}, UtcNs{24 * kHourNs}, 24 * kHourNs, "stopped"});
  storage::RegulatorInterval interval;
  interval.end = {600 * kNsPerSecond};
  interval.input_half_cycles = interval.output_half_cycles = interval.pairs = 60000;
  interval.input_in_band = 30000;
  interval.output_in_band = 59000;
  interval.output_low = 700;
  interval.output_high = 300;
  interval.correctable = 60000;
  evidence.intervals.push_back(interval);
  return evidence;
}

storage::Event excursion(Origin origin, double begin_s, double lasting_s, double extreme_v) {
  storage::Event event;
  event.side = Side::output;
  event.kind = EventKind::out_of_band;
  event.begin_sample = {static_cast<std::int64_t>(begin_s * 6400.0)};
  event.begin = {static_cast<std::int64_t>(begin_s * 1e9)};
  event.duration_ns = static_cast<std::int64_t>(lasting_s * 1e9);
  event.end = event.begin + event.duration_ns;
  event.end_reason = storage::EventEnd::recovered;
  event.extreme_v = extreme_v;
  event.origin = origin;
  event.reason = "because";
  return event;
}

TEST(Verdict, WithoutExcursionsTheBandWasHeld) {
  const Evidence evidence = quiet_day();
  const auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.answer, Answer::held);
  const std::string text = verdict_text(evidence, figures);
  EXPECT_THAT(text, HasSubstr("The regulator held its band of 215.0 to 225.0 V"));
  EXPECT_THAT(text, HasSubstr("98.33 %"));
  EXPECT_THAT(text, HasSubstr("50.00 %"));
  EXPECT_THAT(text, HasSubstr("Measured: 1 d of 1 d (100.00 %)"));
}

TEST(Verdict, ExcursionsAreCountedByOriginAndTheLongestAndWorstNamed) {
  Evidence evidence = quiet_day();
  evidence.events = {excursion(Origin::supply, 100, 20, 0.0), excursion(Origin::regulator, 1000, 1500, 257.4),
                     excursion(Origin::supply, 5000, 10, 180.0)};
  const auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.answer, Answer::not_held);
  EXPECT_EQ(figures.excursions, 3);
  EXPECT_EQ(figures.by_origin[static_cast<std::size_t>(Origin::supply)].times, 2);
  EXPECT_EQ(figures.by_origin[static_cast<std::size_t>(Origin::supply)].total_ns, 30 * kNsPerSecond);
  EXPECT_EQ(figures.by_origin[static_cast<std::size_t>(Origin::regulator)].total_ns, 1500 * kNsPerSecond);
  EXPECT_DOUBLE_EQ(figures.longest->extreme_v, 257.4);
  EXPECT_DOUBLE_EQ(figures.worst->extreme_v, 0.0);
  const std::string text = verdict_text(evidence, figures);
  EXPECT_THAT(text, HasSubstr("The regulator did not hold its band"));
  EXPECT_THAT(text, HasSubstr("3 times"));
  EXPECT_THAT(text, HasSubstr("To blame is the regulator for 1 (25 min) and the supply for 2 (30"));
}

TEST(Verdict, HeldOffInputEventsAreTheRegulatorsMerit) {
  Evidence evidence = quiet_day();
  for (const bool held : {true, true, false}) {
    storage::Event sag;
    sag.kind = EventKind::sag;
    sag.held_off = held;
    evidence.events.push_back(sag);
  }
  const auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.answer, Answer::held);
  EXPECT_EQ(figures.input.events[0], 3);
  EXPECT_EQ(figures.input.held_off, 2);
  EXPECT_THAT(verdict_text(evidence, figures), HasSubstr("2 of 3"));
}

TEST(Verdict, ASiteWithOnlyInputsSaysWhichAnswerItCannotGive) {
  Evidence evidence = quiet_day();
  evidence.site.channels.pop_back();
  const auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.answer, Answer::no_output);
  const std::string text = verdict_text(evidence, figures);
  EXPECT_THAT(text, HasSubstr("cannot be said"));
  EXPECT_THAT(text, HasSubstr("not measured"));
}

TEST(Verdict, GapsAreCountedAndNeverTakenForGoodTime) {
  Evidence evidence = quiet_day();
  evidence.coverage = {{UtcNs{0}, UtcNs{kHourNs}, kHourNs, "samples lost"},
                       {UtcNs{3 * kHourNs}, UtcNs{4 * kHourNs}, kHourNs, "samples lost"},
                       {UtcNs{4 * kHourNs + 1}, UtcNs{5 * kHourNs}, kHourNs, "stopped"}};
  const auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.span_ns, 5 * kHourNs);
  EXPECT_EQ(figures.measured_ns, 3 * kHourNs);
  EXPECT_EQ(figures.gaps, 2);
  EXPECT_EQ(figures.longest_gap_ns, 2 * kHourNs);
  EXPECT_THAT(verdict_text(evidence, figures),
              HasSubstr("Measured: 3 h of 5 h (60.00 %), with 2 gaps, the longest 2 h"));
}

TEST(Verdict, APeriodAskedForWithoutAnyMeasuringSaysSo) {
  Evidence evidence = quiet_day();
  evidence.coverage.clear();
  evidence.intervals.clear();
  const auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.answer, Answer::nothing_measured);
  EXPECT_THAT(verdict_text(evidence, figures), HasSubstr("nothing can be said"));
}

TEST(Verdict, AShareJustShortOfAllIsNotRoundedUpToAll) {
  Evidence evidence = quiet_day();
  evidence.intervals[0].output_half_cycles = 10'000'000;
  evidence.intervals[0].output_in_band = 9'999'999;
  const std::string text = verdict_text(evidence, verdict_figures(evidence));
  EXPECT_THAT(text, HasSubstr("over 99.99 %"));
}

TEST(Verdict, TheJsonHoldsTheSameFiguresInUtcAndSeconds) {
  Evidence evidence = quiet_day();
  evidence.events = {excursion(Origin::regulator, 1000, 1500, 257.4)};
  const auto json = nlohmann::json::parse(verdict_json(evidence, verdict_figures(evidence)));
  EXPECT_EQ(json["answer"], "not held");
  EXPECT_EQ(json["excursions"]["by_origin"]["regulator"]["total_s"], 1500.0);
  EXPECT_EQ(json["excursions"]["worst"]["begin"], "1970-01-01T00:16:40.000000Z");
  EXPECT_NEAR(json["output"]["in_band_share"].get<double>(), 59.0 / 60.0, 1e-12);
  EXPECT_EQ(json["coverage"]["measured_s"], 86400.0);
}

config::ChannelCalibration output_calibration(double expanded_pct) {
  config::ChannelCalibration c;
  c.channel = {Side::output, Phase::l1};
  c.expanded_pct = expanded_pct;
  c.due = UtcNs{12 * kHourNs};
  return c;
}

TEST(Verdict, WithoutACalibrationItSaysThatTheUncertaintyIsNotStated) {
  Evidence evidence = quiet_day();
  evidence.events = {excursion(Origin::supply, 100, 20, 225.5)};
  evidence.calibrations = {{UtcNs{0}, {}}};
  const auto figures = verdict_figures(evidence);
  const std::string text = verdict_text(evidence, figures);
  EXPECT_THAT(text,
              HasSubstr("No calibration: voltages rest on the site file's scale alone, their uncertainty is "
                        "not stated."));
  EXPECT_THAT(text, Not(HasSubstr("Against the band's")));
  const auto json = nlohmann::json::parse(verdict_json(evidence, figures));
  EXPECT_TRUE(json["excursions"]["longest"]["allowing_for_uncertainty"].is_null());
  EXPECT_EQ(json["calibration"]["not_calibrated"].size(), 2U);
}

TEST(Verdict, TheLongestAndTheWorstExcursionAreWeighedAgainstTheUncertainty) {
  Evidence evidence = quiet_day();
  evidence.events = {excursion(Origin::supply, 100, 20, 225.5), excursion(Origin::regulator, 1000, 5, 207.0)};
  evidence.calibrations = {{UtcNs{0}, {{output_calibration(1.0)}, "text"}}};
  const auto figures = verdict_figures(evidence);
  ASSERT_TRUE(figures.longest_weighed && figures.worst_weighed);
  EXPECT_EQ(figures.longest_weighed->allowance, Allowance::undecided);  // 225.5 ± 2.3 V against 225 V
  EXPECT_EQ(figures.worst_weighed->allowance, Allowance::outside);      // 207.0 ± 2.1 V against 215 V
  EXPECT_EQ(figures.worst_weighed->which, Limit::lower);
  const std::string text = verdict_text(evidence, figures);
  EXPECT_THAT(text, HasSubstr("upper edge, 225.0 V, and good for ±2.3 V: cannot be decided"));
  EXPECT_THAT(text, HasSubstr("lower edge, 215.0 V, and good for ±2.1 V: outside, even allowing"));
  EXPECT_THAT(
      text, HasSubstr("output L1  calibrated 1970-01-01; 220 V is good for ±2.2 V (k = 2, about 95 %); PAST "
                      "DUE since 1970-01-01"));
  EXPECT_THAT(text, HasSubstr("input L1   no calibration"));
  EXPECT_THAT(text, Not(HasSubstr("changed within the period")));
  const auto json = nlohmann::json::parse(verdict_json(evidence, figures));
  EXPECT_EQ(json["excursions"]["longest"]["allowing_for_uncertainty"]["answer"], "undecided");
  EXPECT_EQ(json["excursions"]["worst"]["allowing_for_uncertainty"]["answer"], "outside");
  EXPECT_EQ(json["excursions"]["worst"]["allowing_for_uncertainty"]["limit_v"], 215.0);
  EXPECT_EQ(json["calibration"]["in_force"][0]["past_due"], true);
  EXPECT_EQ(json["calibration"]["not_calibrated"], nlohmann::json::array({"input L1"}));
}

TEST(Verdict, AnExtremeThatIsOnlyABoundIsNeverCalledInside) {
  Evidence evidence = quiet_day();
  evidence.events = {excursion(Origin::supply, 100, 20, 222.0)};
  evidence.events[0].extreme_is_bound = true;
  evidence.calibrations = {{UtcNs{0}, {{output_calibration(0.5)}, "text"}}};
  EXPECT_EQ(verdict_figures(evidence).longest_weighed->allowance, Allowance::undecided);
  evidence.events[0].extreme_is_bound = false;
  EXPECT_EQ(verdict_figures(evidence).longest_weighed->allowance, Allowance::inside);
}

TEST(Verdict, ACalibrationThatChangedWithinThePeriodIsSaidAndEachEventHasItsOwn) {
  Evidence evidence = quiet_day();
  evidence.events = {excursion(Origin::supply, 100, 20, 226.0)};
  evidence.calibrations = {{UtcNs{0}, {{output_calibration(1.0)}, "a"}},
                           {UtcNs{kHourNs}, {{output_calibration(0.1)}, "b"}}};
  auto figures = verdict_figures(evidence);
  EXPECT_EQ(figures.longest_weighed->allowance, Allowance::undecided);
  EXPECT_THAT(verdict_text(evidence, figures),
              HasSubstr("changed within the period (1970-01-01 06:30:00 +05:30)"));
  EXPECT_EQ(nlohmann::json::parse(verdict_json(evidence, figures))["calibration"]["changed_at"][0],
            "1970-01-01T01:00:00.000Z");
  evidence.events = {excursion(Origin::supply, 4000, 20, 226.0)};
  figures = verdict_figures(evidence);
  EXPECT_EQ(figures.longest_weighed->allowance, Allowance::outside);
}

}  // namespace
}  // namespace tramline::tools
