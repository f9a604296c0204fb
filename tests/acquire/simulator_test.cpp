#include "daemon/acquire/simulator.hpp"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <tuple>
#include <utility>
#include <vector>

#include "daemon/acquire/noise.hpp"
#include "tests/acquire/files.hpp"

namespace tramline::acquire {
namespace {

using What = config::ScriptedHappening::What;
using testing::hear;
using testing::Heard;

config::Site site_with(std::vector<Channel> channels, int phases = 1, bool regulated = true) {
  config::Site site;
  site.nominal_v = 220.0;
  site.nominal_hz = 50.0;
  site.phases = phases;
  for (const Channel& channel : channels) {
    config::ChannelSettings settings;
    settings.channel = channel;
    site.channels.push_back(settings);
  }
  if (regulated) {
    config::RegulatorSettings regulator;
    regulator.target_v = 220.0;
    regulator.band_low_v = 215.0;
    regulator.band_high_v = 225.0;
    regulator.ratio_min = 0.8;
    regulator.ratio_max = 1.4;
    site.regulator = regulator;
  }
  return site;
}

const std::vector<Channel> kBoth = {{Side::input, Phase::l1}, {Side::output, Phase::l1}};

/// A supply as steady as can be: no wander, no noise, no harmonics, no load.
config::SimulatorSettings steady(double run_for_s) {
  config::SimulatorSettings settings;
  settings.begin = UtcNs{0};
  settings.run_for_s = run_for_s;
  settings.grid.wander_pct = 0.0;
  settings.grid.noise_v = 0.0;
  settings.grid.sensor_noise_v = 0.0;
  settings.grid.frequency_drift_hz = 0.0;
  settings.grid.harmonics_pct.clear();
  settings.servo.output_impedance_ohm = 0.0;
  settings.servo.load_step_a = 0.0;
  return settings;
}

Heard simulated(const config::SimulatorSettings& settings, const config::Site& site, std::size_t cut = 6400) {
  auto source = open_simulator(settings, site, UtcNs{0});
  return hear(*source.value(), cut);
}

double rms(const std::vector<float>& volts, std::size_t from, std::size_t count) {
  double energy = 0.0;
  for (std::size_t i = from; i < from + count; ++i)
    energy += static_cast<double>(volts[i]) * static_cast<double>(volts[i]);
  return std::sqrt(energy / static_cast<double>(count));
}

config::ScriptedHappening scripted(What what, double at_s, double lasting_s, double to_pct = 0.0) {
  config::ScriptedHappening h;
  h.what = what;
  h.at_s = at_s;
  h.lasting_s = lasting_s;
  h.to_pct = to_pct;
  return h;
}

TEST(Simulator, ASteadySupplyHasItsVoltageToAHundredthOfAPercentAndStartsAtAZeroCrossing) {
  const auto heard = simulated(steady(2.0), site_with(kBoth));
  ASSERT_EQ(heard.volts[0].size(), 12800U);
  EXPECT_NEAR(rms(heard.volts[0], 0, 12800), 220.0, 0.022);
  EXPECT_NEAR(rms(heard.volts[1], 0, 12800), 220.0, 0.022);
  EXPECT_NEAR(heard.volts[0][0], 0.0, 1e-3);
  EXPECT_NEAR(heard.volts[0][32], 220.0 * std::numbers::sqrt2, 0.01);
  EXPECT_EQ(heard.end, "the simulated time is over");
}

TEST(Simulator, HarmonicsAddAsSquares) {
  auto settings = steady(2.0);
  settings.grid.harmonics_pct = {{3, 5.0}, {5, 4.0}, {7, 3.0}};
  const auto heard = simulated(settings, site_with(kBoth));
  EXPECT_NEAR(rms(heard.volts[0], 0, 12800), 220.0 * std::sqrt(1.0 + 0.0025 + 0.0016 + 0.0009), 0.03);
}

TEST(Simulator, TheSameSeedGivesTheSameSamplesHoweverManyAreAskedFor) {
  config::SimulatorSettings settings;
  settings.begin = UtcNs{0};
  settings.run_for_s = 3.0;
  settings.script = {scripted(What::sag, 1.0, 0.5, 60.0)};
  const auto site = site_with(kBoth);
  const auto whole = simulated(settings, site, 1000000);
  for (const std::size_t cut : {1U, 7U, 1000U})
    EXPECT_EQ(simulated(settings, site, cut).volts, whole.volts) << cut;
  settings.seed = 2;
  EXPECT_NE(simulated(settings, site).volts, whole.volts);
}

TEST(Simulator, AllThatIsRandomFollowsTheSeed) {
  const auto with_seeds = [](config::SimulatorSettings settings, std::size_t channel) {
    const auto first = simulated(settings, site_with(kBoth)).volts[channel];
    settings.seed = 2;
    return std::pair(first, simulated(settings, site_with(kBoth)).volts[channel]);
  };
  auto settings = steady(20.0);
  auto [first, other] = with_seeds(settings, 0);
  EXPECT_EQ(first, other);  // nothing random is left
  settings.grid.wander_pct = 3.0;
  std::tie(first, other) = with_seeds(settings, 0);
  EXPECT_NE(first, other);
  settings = steady(20.0);
  settings.grid.noise_v = 0.2;
  std::tie(first, other) = with_seeds(settings, 0);
  EXPECT_NE(first, other);
  settings = steady(20.0);
  settings.grid.sensor_noise_v = 0.2;
  std::tie(first, other) = with_seeds(settings, 0);
  EXPECT_NE(first, other);
  settings = steady(20.0);
  settings.servo.output_impedance_ohm = 0.1;
  settings.servo.load_step_a = 3.0;
  settings.servo.load_step_every_s = 2.0;
  std::tie(first, other) = with_seeds(settings, 1);
  EXPECT_NE(first, other);
}

TEST(Simulator, ASagBeginsAtThePointOnWaveAskedForAndLastsAsLong) {
  for (const double degrees : {0.0, 45.0, 90.0, 135.0}) {
    auto settings = steady(3.0);
    auto sag = scripted(What::sag, 1.003, 0.2, 40.0);
    sag.phase_deg = degrees;
    settings.script = {sag};
    const auto volts = simulated(settings, site_with(kBoth)).volts[0];
    // Where the samples leave the undisturbed sine.
    std::size_t begin = 0;
    const auto sine = [](std::size_t n) {
      return 220.0 * std::numbers::sqrt2 * std::sin(2.0 * std::numbers::pi * static_cast<double>(n) / 128.0);
    };
    while (std::abs(static_cast<double>(volts[begin]) - sine(begin)) < 1.0)
      ++begin;
    const double angle = std::fmod(static_cast<double>(begin) / 128.0 * 360.0, 360.0);
    EXPECT_NEAR(angle, degrees, 5.7) << degrees;  // two samples: at a crossing the first ones hardly differ
    EXPECT_GE(begin, 6419U);
    EXPECT_LT(begin, 6419U + 130U);
    EXPECT_NEAR(rms(volts, begin + 128, 128), 88.0, 0.1);
    EXPECT_NEAR(rms(volts, begin + 1280 + 128, 128), 220.0, 0.1);
  }
}

TEST(Simulator, AnInterruptionLeavesOnlyNoise) {
  auto settings = steady(3.0);
  settings.grid.sensor_noise_v = 0.05;
  settings.script = {scripted(What::interruption, 1.0, 1.0)};
  const auto heard = simulated(settings, site_with(kBoth));
  for (const auto& volts : heard.volts)
    EXPECT_NEAR(rms(volts, 7000, 5000), 0.05, 0.005);
}

TEST(Simulator, ALevelRampsHoldsAndRampsBack) {
  auto settings = steady(9.0);
  auto level = scripted(What::level, 2.0, 2.0);
  level.to_v = 188.0;
  level.ramp_s = 1.0;
  settings.script = {level};
  const auto volts = simulated(settings, site_with(kBoth)).volts[0];
  EXPECT_NEAR(rms(volts, 6400, 128), 220.0, 0.05);
  EXPECT_NEAR(rms(volts, static_cast<std::size_t>(2.5 * 6400) - 64, 128), 204.0, 0.3);
  EXPECT_NEAR(rms(volts, 4 * 6400, 128), 188.0, 0.05);
  EXPECT_NEAR(rms(volts, static_cast<std::size_t>(5.5 * 6400) - 64, 128), 204.0, 0.3);
  EXPECT_NEAR(rms(volts, 8 * 6400, 128), 220.0, 0.05);
}

TEST(Simulator, TheOutputIsTheInputTimesOneSmoothRatio) {
  auto settings = steady(6.0);
  auto level = scripted(What::level, 1.0, 10.0);
  level.to_v = 188.0;
  level.ramp_s = 0.5;
  settings.script = {level};
  const auto heard = simulated(settings, site_with(kBoth));
  double last = 1.0;
  std::size_t last_at = 0;
  for (std::size_t i = 0; i < heard.volts[0].size(); ++i) {
    if (std::abs(heard.volts[0][i]) < 100.0F) continue;
    const double ratio = static_cast<double>(heard.volts[1][i]) / static_cast<double>(heard.volts[0][i]);
    // 20 V/s at 220 V, and what a float can tell.
    ASSERT_NEAR(ratio, last, 20.0 / 220.0 / 6400.0 * static_cast<double>(i - last_at) + 1e-6) << i;
    last = ratio;
    last_at = i;
  }
  EXPECT_NEAR(last * 188.0, 216.0, 1.5);  // the window comparator stops it just inside the band
}

TEST(Simulator, AtRestEverySampleOfTheOutputIsTheRatioTimesTheInput) {
  auto settings = steady(5.0);
  settings.grid.voltage_v = 210.0;
  settings.grid.noise_v = 1.0;  // noise of the supply passes; noise of the sensors is none here
  settings.grid.harmonics_pct = {{3, 2.0}};
  const auto heard = simulated(settings, site_with(kBoth));
  const double ratio = 220.0 / (210.0 * std::sqrt(1.0 + 0.02 * 0.02));
  for (std::size_t i = 0; i < heard.volts[0].size(); ++i) {
    const double wanted_v = ratio * static_cast<double>(heard.volts[0][i]);
    ASSERT_NEAR(heard.volts[1][i], wanted_v, 1e-6 * 400.0);
  }
}

TEST(Simulator, TheServoStartsAtRestWithTheOutputOnTarget) {
  for (const std::uint64_t seed : {1U, 2U, 3U, 4U, 5U}) {
    for (const double hz : {50.0, 60.0}) {
      auto settings = steady(3.0);
      settings.seed = seed;
      settings.grid.wander_pct = 10.0;
      auto site = site_with(kBoth);
      site.nominal_hz = hz;
      const auto heard = simulated(settings, site);
      EXPECT_NEAR(rms(heard.volts[1], 0, 640), 220.0, 0.1) << seed;
      const double begun = static_cast<double>(heard.volts[1][20]) / static_cast<double>(heard.volts[0][20]);
      const double later =
          static_cast<double>(heard.volts[1][6420]) / static_cast<double>(heard.volts[0][6420]);
      EXPECT_NEAR(begun, later, 1e-6) << seed;
    }
  }
}

TEST(Simulator, WithoutARegulatorTheOutputIsTheInput) {
  auto settings = steady(1.0);
  settings.grid.noise_v = 0.2;
  const auto heard = simulated(settings, site_with(kBoth, 1, false));
  EXPECT_EQ(heard.volts[0], heard.volts[1]);
}

TEST(Simulator, EachFaultOfTheServoShowsInItsOwnWay) {
  struct Row {
    What what;
    double ratio, factor, output_v;
  };
  // The supply falls from 220 V to 188 V at 1 s. Output after 6 s; from 188 V to 215 V a sound servo of 20
  // V/s takes 1.6 s.
  for (const Row& row : {Row{What::servo_stuck, 0, 1, 188.0}, Row{What::servo_stuck_at, 1.10, 1, 206.8},
                         Row{What::servo_reversed, 0, 1, 0.8 * 188.0}, Row{What::output_open, 0, 1, 0.0},
                         Row{What::servo_slow, 0, 0.1, 188.0 + 4.8 * 2.0 * 188.0 / 220.0}}) {
    auto settings = steady(6.5);
    auto level = scripted(What::level, 1.0, 100.0);
    level.to_v = 188.0;
    auto fault = scripted(row.what, 0.5, 0.0);
    fault.ratio = row.ratio;
    fault.factor = row.factor;
    settings.script = {fault, level};
    const auto heard = simulated(settings, site_with(kBoth));
    EXPECT_NEAR(rms(heard.volts[0], 38400, 1280), 188.0, 0.05);
    EXPECT_NEAR(rms(heard.volts[1], 38400, 1280), row.output_v, 0.7) << static_cast<int>(row.what);
  }
}

TEST(Simulator, AFaultOfOnePhasesServoLeavesTheOthersSound) {
  std::vector<Channel> channels;
  for (const Phase phase : {Phase::l1, Phase::l2, Phase::l3})
    channels.push_back({Side::output, phase});
  auto settings = steady(8.0);
  auto level = scripted(What::level, 1.0, 100.0);
  level.to_v = 188.0;
  auto stuck = scripted(What::servo_stuck, 0.5, 0.0);
  stuck.phases = {Phase::l2};
  settings.script = {stuck, level};
  const auto heard = simulated(settings, site_with(channels, 3));
  EXPECT_NEAR(rms(heard.volts[0], 44800, 1280), 216.0, 1.5);
  EXPECT_NEAR(rms(heard.volts[1], 44800, 1280), 188.0, 0.1);
  EXPECT_NEAR(rms(heard.volts[2], 44800, 1280), 216.0, 1.5);
}

TEST(Simulator, TheSensedVoltageHoldsStillAtAnyRateAndFrequency) {
  // A window of 1 V and a filter of 1 ms: the motor would follow any ripple of the sensing.
  for (const double rate_hz : {6400.0, 7000.0, 12800.0, 44100.0}) {
    for (const double hz : {50.0, 60.0}) {
      auto settings = steady(4.0);
      settings.rate_hz = rate_hz;
      settings.servo.sense_filter_s = 0.001;
      settings.servo.comparator_low_v = 219.5;
      settings.servo.comparator_high_v = 220.5;
      auto site = site_with(kBoth);
      site.nominal_hz = hz;
      const auto heard = simulated(settings, site);
      double low = 1e9;
      double high = 0.0;
      const auto second = static_cast<std::size_t>(rate_hz);
      for (std::size_t i = second; i < heard.volts[0].size(); ++i) {
        if (std::abs(heard.volts[0][i]) < 100.0F) continue;
        const double ratio = static_cast<double>(heard.volts[1][i]) / static_cast<double>(heard.volts[0][i]);
        low = std::min(low, ratio);
        high = std::max(high, ratio);
      }
      EXPECT_LT(high - low, 1e-6) << rate_hz << " a second, " << hz << " Hz";
    }
  }
}

TEST(Simulator, ThreePhasesStand120DegreesApartAndASagMayTakeOneOfThem) {
  const std::vector<Channel> channels = {
      {Side::input, Phase::l1}, {Side::input, Phase::l2}, {Side::input, Phase::l3}};
  auto settings = steady(3.0);
  auto sag = scripted(What::sag, 1.0, 1.0, 50.0);
  sag.phases = {Phase::l2};
  settings.script = {sag};
  const auto heard = simulated(settings, site_with(channels, 3, false));
  for (std::size_t i = 0; i < 1280; ++i)
    EXPECT_NEAR(heard.volts[0][i] + heard.volts[1][i] + heard.volts[2][i], 0.0, 0.05);
  // L2 follows L1 by a third of a cycle of 128 samples.
  EXPECT_NEAR(heard.volts[1][32 + 43], heard.volts[0][32], 1.0);
  EXPECT_NEAR(rms(heard.volts[0], 7680, 1280), 220.0, 0.05);
  EXPECT_NEAR(rms(heard.volts[1], 7680, 1280), 110.0, 0.05);
}

TEST(Simulator, TheVoltageWandersWithinItsBounds) {
  auto settings = steady(3600.0);
  settings.rate_hz = 1600.0;
  settings.grid.wander_pct = 4.0;
  const auto volts = simulated(settings, site_with({{Side::input, Phase::l1}}, 1, false)).volts[0];
  double low = 1e9;
  double high = 0.0;
  for (std::size_t i = 0; i + 320 < volts.size(); i += 16000) {
    low = std::min(low, rms(volts, i, 320));
    high = std::max(high, rms(volts, i, 320));
  }
  EXPECT_GE(low, 220.0 * 0.96 - 0.1);
  EXPECT_LE(high, 220.0 * 1.04 + 0.1);
  EXPECT_GT(high - low, 1.0);
}

TEST(Simulator, ASensorsRangeClipsAndIsReported) {
  auto site = site_with({{Side::input, Phase::l1}}, 1, false);
  site.channels[0].range_v = 300.0;
  const auto heard = simulated(steady(1.0), site);
  EXPECT_EQ(*std::max_element(heard.volts[0].begin(), heard.volts[0].end()), 300.0F);
  EXPECT_GT(heard.over_range, 100);
}

TEST(Simulator, AStretchOverRangeIsReportedAsOneSpan) {
  auto site = site_with({{Side::input, Phase::l1}}, 1, false);
  site.channels[0].range_v = 300.0;
  auto source = open_simulator(steady(1.0), site, UtcNs{0});
  measure::Block block;
  ASSERT_TRUE(source.value()->next(block, 6400).value());
  EXPECT_EQ(block.over_range.size(), 100U);  // each half-cycle of a second
  std::size_t frames = 0;
  for (const auto& span : block.over_range)
    frames += span.frames;
  const auto volts = block.channel(0);
  EXPECT_EQ(static_cast<std::ptrdiff_t>(frames),
            std::count_if(volts.begin(), volts.end(), [](float v) { return std::abs(v) >= 300.0F; }));
}

TEST(Simulator, ItSaysWhatItIsAndWhenItBegins) {
  auto settings = steady(2.0);
  settings.begin.reset();
  const auto now = open_simulator(settings, site_with(kBoth), UtcNs{123});
  EXPECT_EQ(now.value()->info().begin, UtcNs{123});
  EXPECT_TRUE(now.value()->info().dated);
  EXPECT_EQ(now.value()->info().frames, 12800);
  settings.begin = UtcNs{7};
  settings.run_for_s = 0.0;
  const auto stated = open_simulator(settings, site_with(kBoth), UtcNs{123});
  EXPECT_EQ(stated.value()->info().begin, UtcNs{7});
  EXPECT_FALSE(stated.value()->info().frames);
}

TEST(Simulator, WhatItCannotSimulateIsRefused) {
  auto settings = steady(1.0);
  EXPECT_FALSE(open_simulator(settings, site_with({{Side::input, Phase::l2}}), UtcNs{0}));
  settings.rate_hz = 0.0;
  EXPECT_FALSE(open_simulator(settings, site_with(kBoth), UtcNs{0}));
}

TEST(WhiteNoise, HasTheRmsAskedForAndNoMean) {
  WhiteNoise noise(3, 0.5);
  std::vector<float> samples(400000);
  noise.add_to(samples.data(), samples.size());
  double sum = 0.0;
  double energy = 0.0;
  for (const float s : samples) {
    sum += static_cast<double>(s);
    energy += static_cast<double>(s) * static_cast<double>(s);
  }
  EXPECT_NEAR(std::sqrt(energy / 400000.0), 0.5, 0.01);
  EXPECT_NEAR(sum / 400000.0, 0.0, 5.0 * 0.5 / std::sqrt(400000.0));  // five standard errors
}

}  // namespace
}  // namespace tramline::acquire
