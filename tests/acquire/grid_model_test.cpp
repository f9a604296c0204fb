#include "daemon/acquire/grid_model.hpp"

#include <gtest/gtest.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <complex>
#include <map>
#include <numbers>
#include <vector>

namespace tramline::acquire {
namespace {

using What = config::ScriptedHappening::What;

constexpr double kTwoPi = 2.0 * std::numbers::pi;
constexpr double kVolts = 230.0;
constexpr double kPeak_v = kVolts * std::numbers::sqrt2;

/// Nothing moves and nothing is added.
config::SimulatorSettings still(double rate_hz = 6400.0) {
  config::SimulatorSettings settings;
  settings.rate_hz = rate_hz;
  settings.grid.wander_pct = 0.0;
  settings.grid.noise_v = 0.0;
  settings.grid.frequency_drift_hz = 0.0;
  settings.grid.harmonics_pct.clear();
  return settings;
}

using Phases = std::vector<std::vector<float>>;

/// At least `seconds` of every phase.
Phases supplied(const config::SimulatorSettings& settings, double seconds, double nominal_hz = 50.0,
                int phases = 1) {
  GridModel grid(settings, kVolts, nominal_hz, phases);
  const auto chunks = static_cast<std::size_t>(std::ceil(seconds * settings.rate_hz / GridModel::kChunk));
  Phases volts(static_cast<std::size_t>(phases), std::vector<float>(chunks * GridModel::kChunk));
  for (std::size_t chunk = 0; chunk < chunks; ++chunk) {
    std::array<float*, 3> into{};
    for (std::size_t p = 0; p < volts.size(); ++p)
      into[p] = volts[p].data() + chunk * GridModel::kChunk;
    grid.next(into);
  }
  return volts;
}

double rms(const std::vector<float>& volts, std::size_t from, std::size_t count) {
  double energy = 0.0;
  for (std::size_t i = from; i < from + count; ++i)
    energy += static_cast<double>(volts[i]) * static_cast<double>(volts[i]);
  return std::sqrt(energy / static_cast<double>(count));
}

/// Peak and angle of the sine component at `hz` over the first `count` samples, which hold whole cycles.
std::complex<double> component(const std::vector<float>& volts, std::size_t count, double hz,
                               double rate_hz) {
  std::complex<double> sum;
  for (std::size_t n = 0; n < count; ++n)
    sum += static_cast<double>(volts[n]) * std::polar(1.0, -kTwoPi * hz * static_cast<double>(n) / rate_hz);
  return sum * std::complex<double>(0.0, 2.0 / static_cast<double>(count));
}

/// Upward zero crossings, in samples.
std::vector<double> crossings(const std::vector<float>& volts) {
  std::vector<double> found;
  for (std::size_t i = 1; i < volts.size(); ++i) {
    const auto before = static_cast<double>(volts[i - 1]);
    const auto after = static_cast<double>(volts[i]);
    if (before < 0.0 && after >= 0.0) found.push_back(static_cast<double>(i - 1) + before / (before - after));
  }
  return found;
}

config::ScriptedHappening happening(What what, double at_s, double lasting_s, double to_pct = 0.0) {
  config::ScriptedHappening h;
  h.what = what;
  h.at_s = at_s;
  h.lasting_s = lasting_s;
  h.to_pct = to_pct;
  return h;
}

TEST(GridModel, EverySampleOfASteadySupplyIsThatOfTheFormula) {
  struct Row {
    double rate_hz, nominal_hz;
    std::map<int, double> harmonics_pct;
  };
  // Rates at which no cycle holds whole table entries, too.
  for (const Row& row : {Row{6400, 50, {}}, Row{7001, 50, {}}, Row{6400, 60, {{3, 1.5}, {5, 2.5}, {7, 1.0}}},
                         Row{1000, 50, {{2, 1.0}}}, Row{44100, 60, {{15, 1.0}}}}) {
    auto settings = still(row.rate_hz);
    settings.grid.harmonics_pct = row.harmonics_pct;
    const auto volts = supplied(settings, 3.0, row.nominal_hz)[0];
    double worst_v = 0.0;
    double energy = 0.0;
    double energy_wanted = 0.0;
    for (std::size_t n = 0; n < volts.size(); ++n) {
      const double angle = kTwoPi * std::fmod(static_cast<double>(n) * row.nominal_hz / row.rate_hz, 1.0);
      double wanted_v = std::sin(angle);
      for (const auto& [order, pct] : row.harmonics_pct)
        wanted_v -= pct / 100.0 * std::sin(order * angle);
      wanted_v *= kPeak_v;
      worst_v = std::max(worst_v, std::abs(static_cast<double>(volts[n]) - wanted_v));
      energy += static_cast<double>(volts[n]) * static_cast<double>(volts[n]);
      energy_wanted += wanted_v * wanted_v;
    }
    EXPECT_LT(worst_v, 1e-5 * kVolts) << row.rate_hz;
    EXPECT_NEAR(std::sqrt(energy / energy_wanted), 1.0, 1e-6) << row.rate_hz;
  }
}

TEST(GridModel, ItTellsItsRmsWithTheHarmonics) {
  auto settings = still();
  settings.grid.harmonics_pct = {{3, 30.0}, {5, 40.0}};
  const GridModel grid(settings, kVolts, 50.0, 1);
  EXPECT_NEAR(grid.rms_v(0), kVolts * std::sqrt(1.0 + 0.09 + 0.16), 1e-9);
  EXPECT_NEAR(rms(supplied(settings, 1.0)[0], 0, 6400), grid.rms_v(0), 1e-4 * kVolts);
}

TEST(GridModel, HarmonicsHaveTheSharesAskedForAndNothingElseIsThere) {
  auto settings = still();
  settings.grid.harmonics_pct = {{3, 1.5}, {5, 2.5}, {7, 1.0}};
  const auto volts = supplied(settings, 1.0)[0];
  const double fundamental = std::abs(component(volts, 6400, 50.0, 6400.0));
  EXPECT_NEAR(fundamental, kPeak_v, 1e-3);
  for (int order = 2; order <= 20; ++order) {
    const auto asked = settings.grid.harmonics_pct.find(order);
    const double pct = asked == settings.grid.harmonics_pct.end() ? 0.0 : asked->second;
    EXPECT_NEAR(std::abs(component(volts, 6400, 50.0 * order, 6400.0)) / fundamental * 100.0, pct, 1e-3)
        << order;
  }
}

TEST(GridModel, WithoutDriftTheFrequencyIsTheNominalOne) {
  for (const double hz : {50.0, 60.0}) {
    const auto at = crossings(supplied(still(), 20.0, hz)[0]);
    const double cycles = static_cast<double>(at.size() - 1);
    EXPECT_NEAR(cycles * 6400.0 / (at.back() - at.front()), hz, 1e-5);
  }
}

TEST(GridModel, TheFrequencyWandersWithinItsBoundsAndThePhaseNeverJumps) {
  auto settings = still(1600.0);
  settings.grid.frequency_drift_hz = 0.5;
  const auto volts = supplied(settings, 1800.0)[0];
  const auto at = crossings(volts);
  double low = 1e9;
  double high = 0.0;
  for (std::size_t i = 50; i < at.size(); i += 50) {
    const double hz = 50.0 * 1600.0 / (at[i] - at[i - 50]);
    low = std::min(low, hz);
    high = std::max(high, hz);
  }
  EXPECT_GE(low, 49.5 - 0.002);
  EXPECT_LE(high, 50.5 + 0.002);
  EXPECT_GT(high - low, 0.2);

  // v[n+1] + v[n-1] = 2 cos(w) v[n] on a sine; a jump of the phase by d breaks it by d times the peak.
  double worst_v = 0.0;
  for (std::size_t n = 1; n + 1 < volts.size(); ++n) {
    // Within the bounds of w; only near the zero crossing, where w hardly matters.
    if (std::abs(volts[n]) > 10.0F) continue;
    const double rest = static_cast<double>(volts[n + 1]) + static_cast<double>(volts[n - 1]) -
                        2.0 * std::cos(kTwoPi * 50.0 / 1600.0) * static_cast<double>(volts[n]);
    worst_v = std::max(worst_v, std::abs(rest));
  }
  EXPECT_LT(worst_v, 5e-4 * kPeak_v);
}

TEST(GridModel, ADayOfVoltageWandersSlowlyWithinItsBounds) {
  for (const std::uint64_t seed : {1U, 2U}) {
    auto settings = still(200.0);  // four samples a cycle give the r.m.s. of a sine exactly
    settings.seed = seed;
    settings.grid.wander_pct = 4.0;
    const auto volts = supplied(settings, 86400.0)[0];
    double low = 1e9;
    double high = 0.0;
    double last = 0.0;
    double fastest = 0.0;
    for (std::size_t i = 0; i + 200 <= volts.size(); i += 200) {
      const double now = rms(volts, i, 200);
      if (i > 0) fastest = std::max(fastest, std::abs(now - last));
      low = std::min(low, now);
      high = std::max(high, now);
      last = now;
    }
    EXPECT_GE(low, kVolts * 0.96 - 0.001);
    EXPECT_LE(high, kVolts * 1.04 + 0.001);
    EXPECT_GT(high - low, kVolts * 0.03);
    EXPECT_LT(fastest, kVolts * 0.0005);  // within a second: 4 % times 2 pi over ten minutes
    EXPECT_GT(fastest, 0.0);
  }
}

TEST(GridModel, ThreePhasesStandAt0And240And120Degrees) {
  const auto volts = supplied(still(), 1.0, 50.0, 3);
  const double wanted_deg[] = {0.0, -120.0, 120.0};
  for (std::size_t p = 0; p < 3; ++p) {
    const auto sine = component(volts[p], 6400, 50.0, 6400.0);
    EXPECT_NEAR(std::abs(sine), kPeak_v, 1e-3);
    EXPECT_NEAR(std::arg(sine) * 360.0 / kTwoPi, wanted_deg[p], 1e-4) << p;
  }
}

TEST(GridModel, ASagASwellAndAnInterruptionScaleJustTheirSamples) {
  struct Row {
    What what;
    double to_pct;
    float factor;
  };
  auto settings = still();
  settings.grid.frequency_drift_hz = 0.03;
  settings.grid.wander_pct = 3.0;
  settings.grid.harmonics_pct = {{3, 1.5}, {5, 2.5}};
  const auto plain = supplied(settings, 3.0)[0];
  for (const Row& row :
       {Row{What::sag, 40.0, 0.4F}, Row{What::swell, 120.0, 1.2F}, Row{What::interruption, 50.0, 0.0F}}) {
    auto scripted = settings;
    scripted.script = {happening(row.what, 1.003, 0.35, row.to_pct)};
    const auto volts = supplied(scripted, 3.0)[0];
    std::size_t begin = 0;
    while (begin < volts.size() && volts[begin] == plain[begin])
      ++begin;
    std::size_t end = volts.size();
    while (end > 0 && volts[end - 1] == plain[end - 1])
      --end;
    ASSERT_LT(begin, end);
    EXPECT_EQ(end - begin, 2240U);  // 0.35 s
    for (std::size_t n = begin; n < end; ++n)
      EXPECT_FLOAT_EQ(volts[n], row.factor * plain[n]);
  }
}

TEST(GridModel, AHappeningBeginsAtTheFirstSampleOnItsPointOnWave) {
  for (const double hz : {50.0, 60.0}) {
    for (const double degrees : {0.0, 1.0, 45.0, 90.0, 180.0, 270.0, 359.0}) {
      for (const double at_s : {0.0, 0.5, 1.003, 1.0199}) {
        auto interruption = happening(What::interruption, at_s, 0.2);
        interruption.phase_deg = degrees;
        auto settings = still();
        settings.script = {interruption};
        const auto volts = supplied(settings, 2.0, hz)[0];
        // The first angle of that kind at or after at_s, from the phase of a steady sine alone.
        const double cycle = std::ceil(at_s * hz - degrees / 360.0 - 1e-9);
        const auto begin =
            static_cast<std::size_t>(std::ceil((cycle + degrees / 360.0) / hz * 6400.0 - 1e-6));
        const auto end = begin + 1280;
        for (std::size_t n = begin; n < end; ++n)
          ASSERT_EQ(volts[n], 0.0F) << hz << " Hz, " << degrees << " degrees, at " << at_s << " s";
        // The samples just outside are those of the sine, 0 at its own crossings.
        for (const std::size_t n : {begin - 1, begin - 2, end, end + 1}) {
          if (n >= volts.size()) continue;
          const double wanted_v = kPeak_v * std::sin(kTwoPi * hz * static_cast<double>(n) / 6400.0);
          EXPECT_NEAR(volts[n], wanted_v, 0.01)
              << hz << " Hz, " << degrees << " degrees, at " << at_s << " s";
        }
      }
    }
  }
}

TEST(GridModel, WhatIsScriptedForOnePhaseLeavesTheOthersAlone) {
  const auto plain = supplied(still(), 2.0, 50.0, 3);
  auto settings = still();
  auto level = happening(What::level, 0.5, 1.0);
  level.to_v = 188.0;
  level.phases = {Phase::l3};
  auto swell = happening(What::swell, 0.5, 1.0, 115.0);
  swell.phases = {Phase::l1};
  settings.script = {level, swell};
  const auto volts = supplied(settings, 2.0, 50.0, 3);
  EXPECT_EQ(volts[1], plain[1]);
  EXPECT_NEAR(rms(volts[0], 6400, 1280), 1.15 * kVolts, 0.02);
  EXPECT_NEAR(rms(volts[2], 6400, 1280), 188.0, 0.02);
}

TEST(GridModel, NoiseIsAddedToEachPhaseOfItsOwn) {
  auto settings = still();
  const auto plain = supplied(settings, 10.0, 50.0, 3);
  settings.grid.noise_v = 0.5;
  const auto noisy = supplied(settings, 10.0, 50.0, 3);
  Phases noise(3, std::vector<float>(plain[0].size()));
  for (std::size_t p = 0; p < 3; ++p) {
    for (std::size_t n = 0; n < plain[p].size(); ++n)
      noise[p][n] = noisy[p][n] - plain[p][n];
    EXPECT_NEAR(rms(noise[p], 0, 64000), 0.5, 0.01);
  }
  // White, and none like the other: products average out to within 5 standard errors (0.25 / sqrt(64000)).
  const auto mean_product = [](const std::vector<float>& a, const std::vector<float>& b, std::size_t later) {
    double sum = 0.0;
    for (std::size_t n = 0; n + later < 64000; ++n)
      sum += static_cast<double>(a[n]) * static_cast<double>(b[n + later]);
    return sum / 64000.0;
  };
  for (const std::size_t later : {1U, 2U, 3U, 4U, 32U})
    EXPECT_NEAR(mean_product(noise[0], noise[0], later), 0.0, 0.005) << later;
  EXPECT_NEAR(mean_product(noise[0], noise[1], 0), 0.0, 0.005);
  EXPECT_NEAR(mean_product(noise[0], noise[2], 0), 0.0, 0.005);
}

}  // namespace
}  // namespace tramline::acquire
