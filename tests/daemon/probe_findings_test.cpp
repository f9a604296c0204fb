#include "daemon/probe_findings.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <string>
#include <vector>

#include "tests/daemon/probe_signals.hpp"

namespace tramline {
namespace {

using ::testing::HasSubstr;
using testing::household;
using testing::probed;
using testing::samples_of;
using testing::Signal;

constexpr double kRate = 6400.0;

/// A finding as a test expects it: "must: scale: output".
std::string line_of(const config::Site& site, const Finding& finding) {
  std::string line = finding.severity == Severity::must_be_fixed ? "must"
                     : finding.severity == Severity::look_at_it  ? "look"
                                                                 : "fine";
  line += ": " + std::string(name_of(finding.matter));
  for (std::size_t i = 0; i < finding.channels.size(); ++i)
    line += (i == 0 ? ": " : ", ") + channel_name(site, site.channels[finding.channels[i]].channel);
  return line;
}

std::vector<std::string> lines_of(const config::Site& site, const std::vector<Finding>& findings) {
  std::vector<std::string> lines;
  for (const Finding& finding : findings)
    lines.push_back(line_of(site, finding));
  return lines;
}

/// A supply that stands low, its regulator doing its work: sound sensors on both sides.
Signal supply(double rms_v = 205.0, double degrees = 0.0) {
  Signal signal;
  signal.rms_v = rms_v;
  signal.hz = 50.02;
  signal.degrees = degrees;
  signal.harmonics_pct = {{3, 1.5}, {5, 2.5}, {7, 1.0}};
  signal.noise_v = 0.05;
  signal.common_noise_v = 0.2;
  return signal;
}
Signal load(double rms_v = 230.5, double degrees = 0.0) {
  return supply(rms_v, degrees - 0.3);  // a servo's own lag
}

/// One wrong installation, and all that may be said of it, worst first.
struct Installation {
  const char* wrong;
  std::vector<Signal> signals;
  std::vector<std::string> said;
  std::function<void(config::Site&)> site = [](config::Site&) {};
  double rate_hz = kRate;
  double seconds = 5.0;
};

Signal changed(Signal signal, const std::function<void(Signal&)>& change) {
  change(signal);
  return signal;
}
Signal bent(Signal signal, std::function<double(double)> by) {
  signal.bent = std::move(by);
  return signal;
}
Signal times(Signal signal, double gain) {
  signal.gain = gain;
  return signal;
}
std::function<double(double)> in_steps_of(double step) {
  return [step](double v) { return step * std::round(v / step); };
}
std::function<double(double)> clamped(double low, double high) {
  return [=](double v) { return std::clamp(v, low, high); };
}

std::vector<Installation> single_phase() {
  const auto limit_output = [](config::Site& site) { site.channels[1].range_v = 300.0; };
  return {
      {"nothing", {supply(), load()}, {}},
      {"nothing, the supply high", {supply(248.0), load()}, {}},
      {"nothing, 12 bits of 800 V",
       {bent(supply(), in_steps_of(0.195)), bent(load(), in_steps_of(0.195))},
       {}},
      {"nothing, much distorted",
       {changed(supply(),
                [](Signal& s) {
                  s.harmonics_pct = {{3, 8.0}, {5, 6.0}, {9, 2.0}};
                }),
        changed(load(),
                [](Signal& s) {
                  s.harmonics_pct = {{3, 8.0}, {5, 6.0}, {9, 2.0}};
                })},
       {}},
      {"nothing, a generator's 50.6 Hz",
       {changed(supply(), [](Signal& s) { s.hz = 50.6; }), changed(load(), [](Signal& s) { s.hz = 50.6; })},
       {}},

      {"output not connected",
       {supply(), changed(load(), [](Signal& s) { s.rms_v = 0.02; })},
       {"must: dead: output"}},
      {"output picks up distorted hum",
       {supply(), changed(load(2.3),
                          [](Signal& s) {
                            s.harmonics_pct = {{3, 30.0}};
                          })},
       {"must: dead: output"}},
      {"output stuck at a number",
       {supply(), bent(load(), [](double) { return -325.0; })},
       {"must: dead: output"}},
      {"both dead",
       {times(supply(), 1e-5), times(load(), 1e-5)},
       {"must: dead: input", "must: dead: output"}},

      {"output beyond its declared range",
       {supply(), bent(load(), clamped(-300.0, 300.0))},
       {"must: clipping: output"},
       limit_output},
      {"output beyond a limit that nobody declared",
       {supply(), bent(load(), clamped(-290.0, 310.0))},
       {"must: clipping: output"}},
      {"output cut off above only",
       {supply(), bent(load(), clamped(-1000.0, 300.0))},
       {"must: clipping: output"}},

      {"input shows half waves",
       {bent(supply(), [](double v) { return std::max(0.0, v); }), load()},
       {"must: rectified: input"}},
      {"input shows half waves below",
       {bent(supply(), [](double v) { return std::min(0.0, v); }), load()},
       {"must: rectified: input"}},
      {"input shows full waves",
       {bent(supply(), [](double v) { return std::abs(v); }), load()},
       {"must: rectified: input"}},

      {"offset of 5 V",
       {supply(), changed(load(), [](Signal& s) { s.dc_v = -5.0; })},
       {"look: d.c.: output"}},
      {"offset of 35 V",
       {changed(supply(), [](Signal& s) { s.dc_v = 35.0; }), load()},
       {"must: d.c.: input"}},

      {"noise of 1.5 % of nominal",
       {changed(supply(), [](Signal& s) { s.noise_v = 3.5; }), load()},
       {"look: noise: input"}},
      {"noise of 6 % of nominal",
       {changed(supply(), [](Signal& s) { s.noise_v = 14.0; }), load()},
       {"must: noise: input"}},
      {"steps of 8 V", {bent(supply(), in_steps_of(8.0)), load()}, {"look: noise: input"}},

      {"60 Hz where 50 are nominal",
       {changed(supply(), [](Signal& s) { s.hz = 59.98; }), changed(load(), [](Signal& s) { s.hz = 59.98; })},
       {"must: frequency: input, output"}},
      {"rate stated at twice the true one",
       {changed(supply(), [](Signal& s) { s.hz = 99.97; }), changed(load(), [](Signal& s) { s.hz = 99.97; })},
       {"must: frequency: input, output"}},
      {"51.6 Hz",
       {changed(supply(), [](Signal& s) { s.hz = 51.6; }), changed(load(), [](Signal& s) { s.hz = 51.6; })},
       {"look: frequency: input, output"}},
      {"41 Hz",
       {changed(supply(), [](Signal& s) { s.hz = 41.0; }), changed(load(), [](Signal& s) { s.hz = 41.0; })},
       {"must: frequency: input, output"}},
      {"output from another supply",
       {supply(), changed(load(), [](Signal& s) { s.hz = 50.3; })},
       {"must: frequency: input, output"}},
      {"no mains at all",
       {changed(supply(),
                [](Signal& s) {
                  s.hz = 1000.0;
                  s.harmonics_pct = {};
                }),
        changed(load(),
                [](Signal& s) {
                  s.hz = 1000.0;
                  s.harmonics_pct = {};
                })},
       {"must: frequency: input", "must: frequency: output"}},

      {"output reversed", {supply(), times(load(), -1.0)}, {"must: reversed: input, output"}},
      {"output 7 degrees late", {supply(), load(230.5, -7.0)}, {"look: skew: input, output"}},
      {"output half a sample late",
       {supply(), changed(supply(230.5), [](Signal& s) { s.late_s = 0.5 / kRate; })},
       {"fine: skew: input, output"}},
      {"output a whole sample late",
       {supply(), changed(supply(230.5), [](Signal& s) { s.late_s = -1.0 / kRate; })},
       {"fine: skew: input, output"}},

      {"sides exchanged", {supply(230.5), supply(185.0)}, {"must: sides swapped: input, output"}},
      {"sides exchanged, the ratio not out of reach",
       {supply(230.5), supply(214.0)},
       {"look: sides swapped: input, output"}},
      {"sides exchanged with the servo at its end",
       {supply(203.0), supply(153.0)},
       {"must: sides swapped: input, output"}},

      {"both sensors on one side", {supply(), supply()}, {"look: same signal: input, output"}},
      {"ratio of 1, in band", {supply(230.0), supply(230.0)}, {"look: same signal: input, output"}},
      {"one signal twice",
       {changed(supply(230.0), [](Signal& s) { s.noise_v = 0.0; }),
        changed(supply(230.0), [](Signal& s) { s.noise_v = 0.0; })},
       {"must: same signal: input, output"}},

      {"output off by 5 %", {supply(), load(242.0)}, {"look: out of band: output"}},
      {"output's ratio out of reach", {supply(205.0), load(145.0)}, {"must: ratio: input, output"}},
      {"the supply at 71 %",
       {supply(163.0), load()},
       {"look: scale: input"},
       [](config::Site& site) { site.regulator->ratio_max = 230.0 / 150.0; }},
      {"nothing, the supply at 80 %", {supply(184.0), load()}, {}},

      {"a tenth of a second only",
       {supply(), load()},
       {"must: too short"},
       [](config::Site&) {},
       kRate,
       0.15},
  };
}

TEST(ProbeFindings, EachWrongInstallationIsFoundAndNothingElseIsClaimed) {
  for (const Installation& installation : single_phase()) {
    config::Site site = household();
    installation.site(site);
    const auto figures =
        probed(site, samples_of(installation.signals, installation.seconds, installation.rate_hz),
               installation.rate_hz);
    EXPECT_EQ(lines_of(site, judged(site, figures)), installation.said) << installation.wrong;
  }
}

TEST(ProbeFindings, EachWrongPhaseIsFoundAndNothingElseIsClaimed) {
  const auto three = [](std::vector<double> inputs, std::vector<double> outputs, int reversed = -1) {
    std::vector<Signal> signals;
    for (const double degrees : inputs)
      signals.push_back(supply(205.0 + degrees / 100.0, degrees));
    for (const double degrees : outputs)
      signals.push_back(load(230.0 + degrees / 200.0, degrees));
    if (reversed >= 0) signals[static_cast<std::size_t>(reversed)].gain = -1.0;
    return signals;
  };
  const std::vector<double> right = {0.0, -120.0, 120.0};
  const std::vector<double> left = {0.0, 120.0, -120.0};
  const Installation installations[] = {
      {"nothing", three(right, right), {}},
      {"phases turn the other way", three(left, left), {"look: phase order: input L1, input L2, input L3"}},
      {"outputs L2 and L3 exchanged",
       three(right, left),
       {"must: phases confused: input L2, output L2", "must: phases confused: input L3, output L3"}},
      {"outputs one phase on",
       three(right, {-120.0, 120.0, 0.0}),
       {"must: phases confused: input L1, output L1", "must: phases confused: input L2, output L2",
        "must: phases confused: input L3, output L3"}},
      {"input L2 reversed", three(right, right, 1), {"must: reversed: input L2"}},
      {"output L3 reversed", three(right, right, 5), {"must: reversed: output L3"}},
      {"input L1 reversed, phases turning left",
       three(left, left, 0),
       {"must: reversed: input L1", "look: phase order: input L1, input L2, input L3"}},
      {"output L2 on phase L1 too",
       three(right, {0.0, 0.0, 120.0}),
       {"must: phases confused: output L1, output L2", "must: phases confused: input L2, output L2"}},
  };
  for (const Installation& installation : installations) {
    const config::Site site = household(3);
    const auto figures = probed(site, samples_of(installation.signals, 2.0, kRate), kRate);
    EXPECT_EQ(lines_of(site, judged(site, figures)), installation.said) << installation.wrong;
  }
}

TEST(ProbeFindings, ChannelOnAnotherPhaseIsNamed) {
  const config::Site site = household(3);
  const auto figures = probed(site,
                              samples_of({supply(205, 0), supply(205, -120), supply(205, 120),
                                          load(230, -120), load(230, 0), load(230, 120)},
                                         2.0, kRate),
                              kRate);
  const auto findings = judged(site, figures);
  ASSERT_EQ(findings.size(), 2U);
  EXPECT_THAT(findings[0].what, HasSubstr("it goes with the input L2"));
  EXPECT_THAT(findings[1].what, HasSubstr("it goes with the input L1"));
}

TEST(ProbeFindings, UsualWrongScalesOfTheOutputAreNamedWithTheRightOne) {
  // The factors by their closed forms: a sine's peak over r.m.s. is sqrt 2, its r.m.s. over rectified mean
  // pi / (2 sqrt 2) = 1.1107, phase to phase over phase to neutral sqrt 3.
  const double form = std::numbers::pi / std::sqrt(8.0);
  struct Row {
    double factor;
    Severity severity;
    const char* word;
    const char* scale;  // of 2.5 times the factor
  };
  const Row rows[] = {
      {std::sqrt(2.0), Severity::must_be_fixed, "a peak value had been taken for r.m.s.",
       "2.5 instead of 3.536"},
      {1.0 / std::sqrt(2.0), Severity::look_at_it, "r.m.s. value had been taken for the peak",
       "2.5 instead of 1.768"},
      {form, Severity::look_at_it, "1.111", "2.5 instead of 2.777"},
      {1.0 / form, Severity::look_at_it, "average-responding", "2.5 instead of 2.251"},
      {std::sqrt(3.0), Severity::must_be_fixed, "phase to phase had been taken for phase to neutral",
       "2.5 instead of 4.33"},
      {1.0 / std::sqrt(3.0), Severity::must_be_fixed, "phase to neutral had been taken",
       "2.5 instead of 1.443"},
      {2.0, Severity::must_be_fixed, "twice too large", "2.5 instead of 5"},
      {0.5, Severity::must_be_fixed, "half of what it ought to be", "2.5 instead of 1.25"},
      {10.0, Severity::must_be_fixed, "10 times", "2.5 instead of 25"},
      {0.1, Severity::must_be_fixed, "10 times too small", "2.5 instead of 0.25"},
      {100.0, Severity::must_be_fixed, "100 times", "2.5 instead of 250"},
      {0.01, Severity::must_be_fixed, "100 times too small", "2.5 instead of 0.025"},
      {1000.0, Severity::must_be_fixed, "millivolts had been taken for volts", "2.5 instead of 2500"},
      {0.001, Severity::must_be_fixed, "volts had been taken for millivolts", "2.5 instead of 0.0025"},
  };
  for (const Row& row : rows) {
    config::Site site = household();
    site.channels[1].scale = 2.5 * row.factor;
    const auto figures =
        probed(site, samples_of({supply(186.0), times(load(), row.factor)}, 2.0, kRate), kRate);
    const auto findings = judged(site, figures);
    ASSERT_EQ(findings.size(), 1U) << row.word << ": " << ::testing::PrintToString(lines_of(site, findings));
    EXPECT_EQ(findings[0].matter, Matter::scale) << row.word;
    EXPECT_EQ(findings[0].severity, row.severity) << row.word;
    EXPECT_EQ(findings[0].channels, std::vector<std::size_t>{1});
    EXPECT_THAT(findings[0].what, HasSubstr("would fit if")) << row.word;
    EXPECT_THAT(findings[0].what, HasSubstr(row.word));
    EXPECT_THAT(findings[0].remedy, HasSubstr(row.scale));
    EXPECT_THAT(findings[0].remedy, HasSubstr("Compare with a meter"));
    EXPECT_EQ(findings[0].what.find("honestly") != std::string::npos, row.severity == Severity::look_at_it);
  }
}

TEST(ProbeFindings, LowSupplyMayBeHonestAndSaysSo) {
  config::Site site = household();
  site.regulator->ratio_max = 230.0 / 150.0;
  const auto figures = probed(site, samples_of({supply(163.0), load()}, 2.0, kRate), kRate);
  const auto findings = judged(site, figures);
  ASSERT_EQ(findings.size(), 1U);
  EXPECT_THAT(findings[0].what, HasSubstr("may honestly stand there"));
}

TEST(ProbeFindings, WhatOneSideCannotTellIsSaid) {
  config::Site site = household();
  site.channels.pop_back();
  auto findings = judged(site, probed(site, samples_of({supply()}, 2.0, kRate), kRate));
  EXPECT_EQ(lines_of(site, findings), std::vector<std::string>{"fine: not judged"});
  EXPECT_THAT(findings[0].what, HasSubstr("Only the input is measured"));

  site = household();
  site.channels.erase(site.channels.begin());
  site.regulator.reset();
  findings = judged(site, probed(site, samples_of({load()}, 2.0, kRate), kRate));
  EXPECT_EQ(lines_of(site, findings), (std::vector<std::string>{"fine: not judged", "fine: not judged"}));
}

TEST(ProbeFindings, OffsetAndSignThatWouldPutItRightAreGiven) {
  config::Site site = household();
  site.channels[1].scale = 50.0;
  site.channels[1].offset = -1.25;
  auto turned = times(load(), -1.0);
  turned.dc_v = 40.0;  // times -1: -40 V, -0.8 of the source's units
  const auto findings = judged(site, probed(site, samples_of({supply(), turned}, 2.0, kRate), kRate));
  ASSERT_EQ(lines_of(site, findings),
            (std::vector<std::string>{"must: d.c.: output", "must: reversed: input, output"}));
  EXPECT_THAT(findings[0].remedy, HasSubstr("to -0.45 instead of -1.25"));
  EXPECT_THAT(findings[1].remedy, HasSubstr("set the scale of the output to -50"));
}

TEST(ProbeFindings, LostSamplesAreWeighedByTheirShare) {
  const config::Site site = household();
  const auto samples = samples_of({supply(), load()}, 5.0, kRate);
  const auto with_gap = [&](std::size_t lost) {
    Probe probe(site.channels, testing::stream(kRate));
    probe.take(testing::block_of(samples, 0, 6000, 0), 1.0);
    auto block = testing::block_of(samples, 6000 + lost, 32000, static_cast<std::int64_t>(6000 + lost));
    block.gap = measure::GapCause::overrun;
    probe.take(block, 5.0);
    return judged(site, probe.figures({}));
  };
  const auto few = with_gap(20);
  EXPECT_EQ(lines_of(site, few), std::vector<std::string>{"look: missing samples"});
  EXPECT_THAT(few[0].what, HasSubstr("20 samples of each channel are missing in 1 gap"));
  EXPECT_THAT(few[0].remedy, HasSubstr("too slow"));
  EXPECT_EQ(lines_of(site, with_gap(1600)), std::vector<std::string>{"must: missing samples"});
}

TEST(ProbeFindings, RateIsHeldAgainstWhatIsKnownOfIt) {
  const config::Site site = household();
  const auto samples = samples_of({supply(), load()}, 2.0, kRate);
  const auto at = [&](double ppm, double error_ppm) {
    Probe probe(site.channels, testing::stream(kRate, true));
    probe.take(testing::block_of(samples, 0, 12800, 0), 2.0);
    acquire::StreamHealth health;
    health.rate_hz = kRate * (1.0 + ppm * 1e-6);
    health.rate_error_ppm = error_ppm;
    return lines_of(site, judged(site, probe.figures(health)));
  };
  EXPECT_EQ(at(90.0, 5.0), std::vector<std::string>{});
  EXPECT_EQ(at(-150.0, 5.0), std::vector<std::string>{"look: sample rate"});
  EXPECT_EQ(at(150.0, 60.0), std::vector<std::string>{});  // 3 times 60 ppm
  EXPECT_EQ(at(20'000.0, 5.0), std::vector<std::string>{"must: sample rate"});
}

TEST(ProbeFindings, SkewOfSixChannelsTakenInTurnIsToldApart) {
  // Channel n is sampled n/(6 * 6400) s late, so output L1 seems to lead input L1 by 3 such steps.
  const config::Site site = household(3);
  std::vector<Signal> signals;
  for (const double degrees : {0.0, -120.0, 120.0})
    signals.push_back(supply(205.0, degrees));
  for (const double degrees : {0.0, -120.0, 120.0})
    signals.push_back(supply(230.0, degrees));
  for (std::size_t c = 0; c < signals.size(); ++c)
    signals[c].late_s = static_cast<double>(c) / (6.0 * kRate);
  const auto findings = judged(site, probed(site, samples_of(signals, 2.0, kRate), kRate));
  ASSERT_EQ(findings.size(), 3U) << ::testing::PrintToString(lines_of(site, findings));
  for (const Finding& finding : findings) {
    EXPECT_EQ(finding.severity, Severity::fine);
    EXPECT_THAT(finding.what, HasSubstr("leads"));
    EXPECT_THAT(finding.what, HasSubstr("3/6 of a sample"));
  }
}

TEST(ProbeFindings, BytesThatWereNoFrameAreWorthALook) {
  const config::Site site = household();
  const auto samples = samples_of({supply(), load()}, 1.0, kRate);
  Probe probe(site.channels, testing::stream(kRate, true));
  probe.take(testing::block_of(samples, 0, 6400, 0), 1.0);
  acquire::StreamHealth health;
  health.refused_bytes = 17;
  EXPECT_EQ(lines_of(site, judged(site, probe.figures(health))), std::vector<std::string>{"look: line"});
}

TEST(ProbeFindings, ReadingsAreJudgedByLevelAndRatioOnly) {
  const config::Site site = household();
  auto info = testing::stream(1000.0, true);
  info.readings_every_s = 1.0;
  const auto with = [&](float input_v, float output_v) {
    Probe probe(site.channels, info);
    measure::Block block;
    block.resize(2, 1);
    for (std::int64_t i = 0; i < 5; ++i) {
      block.begin({1000 * i});
      block.channel(0)[0] = input_v + static_cast<float>(i) / 10.0F;
      block.channel(1)[0] = output_v + static_cast<float>(i) / 10.0F;
      probe.take(block, static_cast<double>(i));
    }
    return lines_of(site, judged(site, probe.figures({})));
  };
  EXPECT_EQ(with(205.0F, 230.0F), std::vector<std::string>{"fine: not judged"});
  EXPECT_EQ(with(230.0F, 185.0F),
            (std::vector<std::string>{"must: sides swapped: input, output", "fine: not judged"}));
  EXPECT_EQ(with(205.0F, 3.0F), (std::vector<std::string>{"must: dead: output", "fine: not judged"}));
}

}  // namespace
}  // namespace tramline
