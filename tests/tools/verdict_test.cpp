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

}  // namespace
}  // namespace tramline::tools
