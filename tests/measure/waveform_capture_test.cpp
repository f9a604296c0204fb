#include "daemon/measure/waveform_capture.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

#include "tests/measure/signals.hpp"

namespace tramline::measure {
namespace {

using namespace testing;

config::Site site_with(double before_ms, double after_ms, double longest_ms, double per_day_mb = 50.0) {
  config::Site site = site_of(kInputAndOutput);
  site.capture = {before_ms, after_ms, longest_ms, per_day_mb};
  return site;
}

MeterOutput run(const config::Site& site, const Signal& input, double seconds) {
  const auto volts = sampled(input, seconds);
  return metered(site, {volts, sampled(sine(230.0, 50.0), seconds)});
}

TEST(WaveformCapture, AShortEventIsKeptWholeWithWhatCameBeforeAndAfter) {
  const Signal input = sine(230.0, 50.0, between(2.0, 2.2, 0.4));
  const auto out = run(site_with(100, 150, 2000), input, 4.0);
  const auto events = ended_events(out);
  const auto waves = records_of<storage::Waveform>(out);
  ASSERT_EQ(events.size(), 1U);
  ASSERT_EQ(waves.size(), 1U);
  EXPECT_NEAR(static_cast<double>(events[0].begin - waves[0].begin) / 1e9, 0.100, 0.001);
  EXPECT_NEAR(static_cast<double>(waves[0].end - events[0].end) / 1e9, 0.150, 0.001);
  ASSERT_EQ(waves[0].traces.size(), 2U);
  const auto& trace = waves[0].traces[0];
  for (std::size_t i = 0; i < trace.steps.size(); ++i) {
    const double t = static_cast<double>(waves[0].begin_sample.value + static_cast<std::int64_t>(i)) / kRate;
    EXPECT_NEAR(trace.steps[i] * static_cast<double>(trace.volts_per_step), input(t), 0.01);
  }
}

TEST(WaveformCapture, ALongEventKeepsItsBeginAndItsEndWithinTheMemoryGiven) {
  const auto out = run(site_with(100, 100, 500), sine(230.0, 50.0, between(2.0, 8.0, 0.4)), 10.0);
  const auto events = ended_events(out);
  const auto waves = records_of<storage::Waveform>(out);
  ASSERT_EQ(waves.size(), 2U);
  EXPECT_NEAR(static_cast<double>(waves[0].end - waves[0].begin) / 1e9, 0.6, 0.001);
  EXPECT_NEAR(static_cast<double>(events[0].end - waves[1].begin) / 1e9, 0.1, 0.001);
  EXPECT_NEAR(static_cast<double>(waves[1].end - events[0].end) / 1e9, 0.1, 0.001);
}

TEST(WaveformCapture, EventsThatOverlapShareOneCapture) {
  const auto level = [](double t) { return t >= 2.0 && t < 2.1 ? 0.6 : t >= 2.1 && t < 2.2 ? 0.0 : 1.0; };
  const auto out = run(site_with(100, 100, 2000), sine(230.0, 50.0, level), 4.0);
  EXPECT_EQ(ended_events(out).size(), 2U);
  EXPECT_EQ(records_of<storage::Waveform>(out).size(), 1U);
}

TEST(WaveformCapture, AnEventAtTheVeryBeginKeepsWhatThereIs) {
  const auto out = run(site_with(100, 100, 500), sine(230.0, 50.0, between(0.03, 0.13, 0.4)), 2.0);
  const auto waves = records_of<storage::Waveform>(out);
  ASSERT_EQ(waves.size(), 1U);
  EXPECT_EQ(waves[0].begin_sample.value, 0);
}

TEST(WaveformCapture, BeyondTheDaysAllowanceWaveformsAreLeftOutAndCounted) {
  const auto level = [](double t) { return std::fmod(t, 1.0) > 0.5 && std::fmod(t, 1.0) < 0.6 ? 0.4 : 1.0; };
  const auto out = run(site_with(100, 100, 500, 0.02), sine(230.0, 50.0, level), 6.0);
  EXPECT_EQ(ended_events(out).size(), 6U);
  const auto waves = records_of<storage::Waveform>(out);
  const auto losses = records_of<storage::Loss>(out);
  EXPECT_GT(waves.size(), 0U);
  EXPECT_EQ(waves.size() + losses.size(), 6U);
}

}  // namespace
}  // namespace tramline::measure
