#include "daemon/probe_figures.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <random>

#include "daemon/harmonic_fit.hpp"
#include "tests/daemon/probe_signals.hpp"

namespace tramline {
namespace {

using testing::household;
using testing::NextCut;
using testing::probed;
using testing::samples_of;
using testing::Signal;
using testing::with_input_only;

constexpr double kRate = 6400.0;

ChannelFigures one(const Signal& signal, double seconds = 5.0, double rate_hz = kRate) {
  return probed(with_input_only(), samples_of({signal}, seconds, rate_hz), rate_hz).channels.front();
}

TEST(ProbeFigures, SineWithHarmonicsHasTheRmsAndThdOfItsFormula) {
  // THD of orders 3, 5, 7 at 5, 4, 3 %: sqrt(0.05^2 + 0.04^2 + 0.03^2) = 7.071068 % (IEC 61000-4-7, THD);
  // r.m.s.: root of the sum of squares.
  Signal signal;
  signal.harmonics_pct = {{3, 5.0}, {5, 4.0}, {7, 3.0}};
  const ChannelFigures figures = one(signal);
  ASSERT_TRUE(figures.wave);
  EXPECT_NEAR(figures.wave->thd_pct, 7.071068, 1e-4);
  EXPECT_NEAR(figures.wave->fundamental_v, 230.0, 1e-3);
  EXPECT_NEAR(figures.rms_v, 230.0 * std::sqrt(1.0 + 0.005), 1e-3);
  EXPECT_NEAR(figures.wave->noise_v, 0.0, 1e-3);
  EXPECT_EQ(figures.wave->highest_order, 40);
  EXPECT_NEAR(figures.dc_v, 0.0, 1e-3);
}

TEST(ProbeFigures, ThdGoesAsFarAsTheRateReaches) {
  // 1000 samples a second reach 500 Hz: order 9 at 50 Hz, with a window's width to spare.
  Signal signal;
  signal.harmonics_pct = {{9, 4.0}};
  const ChannelFigures figures = one(signal, 5.0, 1000.0);
  ASSERT_TRUE(figures.wave);
  EXPECT_EQ(figures.wave->highest_order, 9);
  EXPECT_NEAR(figures.wave->thd_pct, 4.0, 1e-3);
}

TEST(ProbeFigures, SquareWaveHasTheThdOfItsFourierSeriesToOrder40) {
  // 1/h for odd h: THD to 40 is 47.03224 %, r.m.s. equals the peak, crest factor 1. Sampled, the series folds
  // back, hence the tolerance; 128 samples a cycle, edges between two samples.
  std::vector<float> volts(32000);
  for (std::size_t n = 0; n < volts.size(); ++n)
    volts[n] = n % 128 < 64 ? 200.0F : -200.0F;
  const auto figures = probed(with_input_only(), {volts}, kRate).channels.front();
  ASSERT_TRUE(figures.wave);
  EXPECT_NEAR(figures.wave->thd_pct, 47.03224, 0.8);
  EXPECT_DOUBLE_EQ(figures.rms_v, 200.0);
  EXPECT_DOUBLE_EQ(figures.crest, 1.0);
  EXPECT_NEAR(figures.wave->fundamental_v, 200.0 * 4.0 / std::numbers::pi / std::numbers::sqrt2, 0.05);
}

TEST(ProbeFigures, DcPeakAndCrestAreThoseOfTheFormula) {
  Signal signal;
  signal.dc_v = 12.5;
  const ChannelFigures figures = one(signal);
  const double peak = 230.0 * std::numbers::sqrt2 + 12.5;
  const double rms = std::sqrt(230.0 * 230.0 + 12.5 * 12.5);
  EXPECT_NEAR(figures.dc_v, 12.5, 1e-3);
  EXPECT_NEAR(figures.rms_v, rms, 1e-3);
  EXPECT_NEAR(figures.peak_v, peak, 1e-3);  // 128 samples a cycle: one of them stands on the crest
  EXPECT_NEAR(figures.crest, peak / rms, 1e-5);
}

TEST(ProbeFigures, FrequencyIsFoundOffNominalUnderHarmonicsDcAndNoise) {
  for (const double hz :
       {25.0, 42.5, 47.0, 49.3, 49.987, 50.0, 50.0123, 53.1, 57.5, 60.0, 69.0, 100.0, 120.0}) {
    Signal signal;
    signal.hz = hz;
    signal.degrees = 33.0;
    signal.dc_v = 20.0;
    signal.noise_v = 1.0;
    signal.harmonics_pct = {{2, 1.0}, {3, 8.0}, {5, 6.0}, {7, 4.0}};
    const ChannelFigures figures = one(signal);
    ASSERT_TRUE(figures.wave) << hz;
    EXPECT_NEAR(figures.wave->hz, hz, 0.002) << hz;
    EXPECT_NEAR(figures.wave->fundamental_v, 230.0, 0.05) << hz;
    EXPECT_NEAR(figures.wave->thd_pct, std::sqrt(1.0 + 64.0 + 36.0 + 16.0), 0.03) << hz;
    EXPECT_NEAR(figures.rms_v, std::sqrt(230.0 * 230.0 * 1.0117 + 400.0 + 1.0), 0.1) << hz;
  }
}

TEST(ProbeFigures, NoiseFloorIsTheDeviationOfTheNoise) {
  // The estimate of 25 windows of 1280 samples scatters by sigma * 1.25 / sqrt(2 * 1197 * 25) = 0.5 %; 3 of
  // these.
  for (const double sigma : {0.05, 0.5, 5.0}) {
    Signal signal;
    signal.hz = 49.93;
    signal.noise_v = sigma;
    signal.harmonics_pct = {{3, 3.0}, {5, 4.0}};
    const ChannelFigures figures = one(signal);
    ASSERT_TRUE(figures.wave);
    EXPECT_NEAR(figures.wave->noise_v, sigma, 0.015 * sigma);
  }
}

TEST(ProbeFigures, ServoAtWorkAndDriftingFrequencyAreNoNoise) {
  // 20 V a second, and 10 mHz a second. Within 0.2 s the fit follows all but the curvature of the phase,
  // pi * 0.01 * t^2: 3.14e-4 rad at the ends, 0.298 of that r.m.s. about its mean: 0.022 V of 240 V.
  std::vector<float> volts(32000);
  for (std::size_t n = 0; n < volts.size(); ++n) {
    const double t = static_cast<double>(n) / kRate;
    volts[n] = static_cast<float>((180.0 + 20.0 * t) * std::numbers::sqrt2 *
                                  std::sin(2.0 * std::numbers::pi * (49.95 * t + 0.005 * t * t)));
  }
  const auto figures = probed(with_input_only(), {volts}, kRate).channels.front();
  ASSERT_TRUE(figures.wave);
  EXPECT_LT(figures.wave->noise_v, 0.025);
}

TEST(ProbeFigures, AnyCuttingGivesTheSameFigures) {
  const auto site = household();
  Signal input;
  input.noise_v = 0.3;
  input.rms_v = 205.0;
  input.hz = 49.3;
  Signal output = input;
  output.rms_v = 230.0;
  output.bent = [](double v) { return std::clamp(v, -300.0, 300.0); };
  auto limited = site;
  limited.channels[1].range_v = 300.0;
  const auto samples = samples_of({input, output}, 3.0, kRate);
  const ProbeFigures whole = probed(limited, samples, kRate, [] { return std::size_t{1'000'000}; });
  std::mt19937 random(7);
  for (const NextCut& cut : {NextCut([] { return std::size_t{1}; }), NextCut([] { return std::size_t{257}; }),
                             NextCut([&random] { return std::size_t{1 + random() % 900}; })}) {
    const ProbeFigures figures = probed(limited, samples, kRate, cut);
    for (std::size_t c = 0; c < 2; ++c) {
      EXPECT_EQ(figures.channels[c].rms_v, whole.channels[c].rms_v);
      EXPECT_EQ(figures.channels[c].dc_v, whole.channels[c].dc_v);
      EXPECT_EQ(figures.channels[c].peak_v, whole.channels[c].peak_v);
      EXPECT_EQ(figures.channels[c].wave->hz, whole.channels[c].wave->hz);
      EXPECT_EQ(figures.channels[c].wave->thd_pct, whole.channels[c].wave->thd_pct);
      EXPECT_EQ(figures.channels[c].wave->noise_v, whole.channels[c].wave->noise_v);
      EXPECT_EQ(figures.channels[c].over_range_frames, whole.channels[c].over_range_frames);
      EXPECT_EQ(figures.channels[c].over_range_spans, whole.channels[c].over_range_spans);
    }
    EXPECT_EQ(figures.pairs.front().ratio, whole.pairs.front().ratio);
    EXPECT_EQ(figures.pairs.front().skew_deg, whole.pairs.front().skew_deg);
  }
  // Two spans a cycle, 147 cycles and nine tenths in 3 s.
  EXPECT_EQ(whole.channels[1].over_range_spans, 296);
}

TEST(ProbeFigures, OverRangeThatIsToldTwiceCountsOnce) {
  Probe probe(with_input_only().channels, testing::stream(kRate));
  const auto samples = samples_of({Signal{}}, 0.1, kRate);
  measure::Block block = testing::block_of(samples, 0, 640, 0);
  block.over_range = {{0, 10, 5}, {0, 12, 1}, {0, 630, 10}};
  probe.take(block, 0.1);
  block.begin({640});
  block.over_range = {{0, 0, 3}};  // goes on from the block before
  probe.take(block, 0.2);
  const auto figures = probe.figures({});
  EXPECT_EQ(figures.channels[0].over_range_frames, 5 + 10 + 3);
  EXPECT_EQ(figures.channels[0].over_range_spans, 2);
}

TEST(ProbeFigures, LimitThatNobodyDeclaredShowsInTheWave) {
  Signal signal;
  signal.noise_v = 0.1;
  signal.bent = [](double v) { return std::clamp(v, -280.0, 300.0); };
  const ChannelFigures figures = one(signal);
  ASSERT_TRUE(figures.upper_limit);
  ASSERT_TRUE(figures.lower_limit);
  EXPECT_EQ(figures.upper_limit->at_v, 300.0);
  EXPECT_EQ(figures.lower_limit->at_v, -280.0);
  // Above 300 of 325.3 V: 2 acos(0.9223) / 2 pi of a cycle of 128 samples, 16.1.
  EXPECT_NEAR(static_cast<double>(figures.upper_limit->longest), 16.1, 2.0);
  EXPECT_GE(figures.upper_limit->runs, 248);
}

TEST(ProbeFigures, RoundAndFlatCrestsInCoarseStepsShowNoLimit) {
  // A crest stands still within one step of the converter, many samples long at a high rate.
  for (const double bits : {8.0, 10.0, 12.0, 16.0}) {
    for (const double third_pct : {0.0, 5.0, 11.1, 15.0}) {  // 1/9 with this sign: flat to the fourth order
      for (const double rate : {6400.0, 48000.0}) {
        const double step = 800.0 / std::exp2(bits);
        Signal signal;
        signal.hz = 50.03;
        signal.harmonics_pct = {{3, third_pct}};
        signal.bent = [step](double v) { return step * std::round(v / step); };
        const ChannelFigures figures = one(signal, 2.0, rate);
        EXPECT_FALSE(figures.upper_limit) << bits << " bits, " << third_pct << " %, " << rate;
        EXPECT_FALSE(figures.lower_limit) << bits << " bits, " << third_pct << " %, " << rate;
      }
    }
  }
}

TEST(ProbeFigures, ConstantIsToldFromAQuietSignal) {
  EXPECT_TRUE(probed(with_input_only(), {std::vector<float>(6400, 1.5F)}, kRate).channels[0].constant);
  std::vector<float> volts(6400, 1.5F);
  volts[3000] = 1.51F;
  EXPECT_FALSE(probed(with_input_only(), {volts}, kRate).channels[0].constant);
}

TEST(ProbeFigures, MissingSamplesAreCountedAndNotBridged) {
  const auto samples = samples_of({Signal{}}, 5.0, kRate);
  Probe probe(with_input_only().channels, testing::stream(kRate));
  probe.take(testing::block_of(samples, 0, 6000, 0), 1.0);
  auto later = testing::block_of(samples, 7000, 27000, 7000);
  later.gap = measure::GapCause::overrun;
  probe.take(later, 4.0);
  later = testing::block_of(samples, 27003, 32000, 27003);
  later.gap = measure::GapCause::samples_lost;
  probe.take(later, 5.0);
  const ProbeFigures figures = probe.figures({});
  EXPECT_EQ(figures.missing.gaps, 2);
  EXPECT_EQ(figures.missing.frames, 1003);
  EXPECT_EQ(figures.missing.longest, 1000);
  EXPECT_EQ(figures.missing.longest_cause, measure::GapCause::overrun);
  EXPECT_EQ(figures.frames, 32000 - 1003);
  EXPECT_DOUBLE_EQ(figures.seconds, 5.0);
  EXPECT_DOUBLE_EQ(figures.longest_stretch_s, 20000.0 / kRate);
  EXPECT_NEAR(figures.channels[0].wave->noise_v, 0.0, 1e-3);
}

TEST(ProbeFigures, RateIsMeasuredOfALiveSourceOnly) {
  const auto samples = samples_of({Signal{}}, 5.0, kRate);
  const auto feed = [&](bool live, double pace, const acquire::StreamHealth& health) {
    Probe probe(with_input_only().channels, testing::stream(kRate, live));
    for (std::size_t from = 0; from < 32000; from += 256)
      probe.take(testing::block_of(samples, from, from + 256, static_cast<std::int64_t>(from)),
                 static_cast<double>(from + 256) / kRate / pace);
    return probe.figures(health).rate;
  };
  EXPECT_FALSE(feed(false, 1.02, {}).measured_hz);
  const auto by_arrivals = feed(true, 1.02, {});
  ASSERT_TRUE(by_arrivals.measured_hz);
  EXPECT_NEAR(*by_arrivals.measured_hz, 1.02 * kRate, 1e-6 * by_arrivals.error_ppm * kRate);
  EXPECT_NEAR(by_arrivals.error_ppm, 10'000.0, 500.0);
  acquire::StreamHealth health;
  health.rate_hz = 6401.0;
  health.rate_error_ppm = 5.0;
  EXPECT_EQ(feed(true, 1.02, health).measured_hz, 6401.0);
  EXPECT_EQ(feed(true, 1.02, health).error_ppm, 15.0);
}

TEST(ProbeFigures, AnchorTellsTheRateWhereTheSourceDoesNot) {
  const auto samples = samples_of({Signal{}}, 5.0, kRate);
  Probe probe(with_input_only().channels, testing::stream(kRate, true));
  probe.take(testing::block_of(samples, 0, 256, 0), 0.04);
  auto block = testing::block_of(samples, 256, 32000, 256);
  block.anchor = measure::ClockAnchor{{256}, {0}, 6400.8, measure::AnchorCause::refined};
  probe.take(block, 5.0);
  EXPECT_EQ(probe.figures({}).rate.measured_hz, 6400.8);
}

TEST(ProbeFigures, SkewIsTheDelayBetweenTheSidesInDegreesAndMicroseconds) {
  // 100 us at 49.3 Hz are 1.7748 degrees. What is sampled later seems to lead.
  Signal input;
  input.hz = 49.3;
  input.noise_v = 0.2;
  Signal output = input;
  output.late_s = 100e-6;
  const auto pair = probed(household(), samples_of({input, output}, 5.0, kRate), kRate).pairs.front();
  ASSERT_TRUE(pair.skew_deg);
  EXPECT_NEAR(*pair.skew_deg, 1.7748, 0.003);
  EXPECT_NEAR(*pair.skew_us, 100.0, 0.15);
}

TEST(ProbeFigures, NoiseCorrelationIsTheShareOfCommonVariance) {
  // 0.4 V of the supply and 0.3 V of each sensor: 0.16 / 0.25.
  Signal input;
  input.common_noise_v = 0.4;
  input.noise_v = 0.3;
  const auto pair = probed(household(), samples_of({input, input}, 5.0, kRate), kRate).pairs.front();
  ASSERT_TRUE(pair.noise_correlation);
  EXPECT_NEAR(*pair.noise_correlation, 0.64, 0.015);
  EXPECT_FALSE(pair.identical);
}

TEST(ProbeFigures, TwoSuppliesHaveNoSkew) {
  Signal input;
  Signal output;
  output.hz = 50.4;
  const auto pair = probed(household(), samples_of({input, output}, 5.0, kRate), kRate).pairs.front();
  EXPECT_FALSE(pair.skew_deg);
}

TEST(ProbeFigures, ReadingsOfAMeterGiveRmsAndNothingElse) {
  auto info = testing::stream(1000.0, true);
  info.readings_every_s = 1.0;
  Probe probe(with_input_only().channels, info);
  measure::Block block;
  block.resize(1, 1);
  // The reading due at 3 s is missing; the others come a little early or late.
  const std::vector<std::pair<std::int64_t, float>> readings = {
      {0, 230.0F}, {1010, 240.0F}, {1990, 230.0F}, {4010, 220.0F}};
  for (const auto& [ms, volts] : readings) {
    block.begin({ms});
    block.channel(0)[0] = volts;
    probe.take(block, static_cast<double>(ms) / 1000.0);
  }
  const ProbeFigures figures = probe.figures({});
  EXPECT_TRUE(figures.readings);
  EXPECT_NEAR(figures.channels[0].rms_v, std::sqrt((2 * 230.0 * 230.0 + 240.0 * 240.0 + 220.0 * 220.0) / 4.0),
              1e-9);
  EXPECT_FALSE(figures.channels[0].wave);
  EXPECT_FALSE(figures.rate.measured_hz);
  EXPECT_EQ(figures.missing.frames, 1);
  EXPECT_EQ(figures.missing.gaps, 1);
}

TEST(ProbeFigures, NoSamplesAndHardlyAnyGiveNoWave) {
  Probe probe(household().channels, testing::stream(kRate));
  EXPECT_EQ(probe.figures({}).frames, 0);
  probe.take(measure::Block{}, 0.0);
  EXPECT_EQ(probe.figures({}).frames, 0);
  for (const double seconds : {1.0 / kRate, 0.01, 0.15}) {
    const auto figures = probed(household(), samples_of({Signal{}, Signal{}}, seconds, kRate), kRate);
    EXPECT_FALSE(figures.channels[0].wave) << seconds;
    EXPECT_FALSE(figures.pairs[0].skew_deg) << seconds;
  }
}

TEST(HarmonicFit, FindsNoFundamentalInNoiseOrWithoutARateForIt) {
  Signal nothing;
  nothing.rms_v = 0.0;
  nothing.noise_v = 1.0;
  const auto noise = samples_of({nothing}, 2.0, kRate).front();
  EXPECT_FALSE(fundamental_hz(noise, kRate));
  EXPECT_FALSE(fundamental_hz(noise, 290.0));
  EXPECT_FALSE(fundamental_hz(std::vector<float>(6400, 0.0F), kRate));
}

TEST(HarmonicFit, GivesTheAngleAtTheMiddleOfTheStretch) {
  // cos(2 pi 50 t + 0.7) about the middle of 1281 samples.
  std::vector<float> volts(1281);
  for (std::size_t n = 0; n < volts.size(); ++n)
    volts[n] = static_cast<float>(
        300.0 * std::cos(2.0 * std::numbers::pi * 50.0 * (static_cast<double>(n) - 640.0) / kRate + 0.7));
  const HarmonicFit fit = fit_harmonics(volts, kRate, 50.0, 10);
  EXPECT_NEAR(std::arg(fit.orders[0]), 0.7, 1e-6);
  EXPECT_NEAR(std::abs(fit.orders[0]), 300.0, 1e-4);
  EXPECT_NEAR(fit.dc_v, 0.0, 1e-4);
}

}  // namespace
}  // namespace tramline
