#include "daemon/measure/meter.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <cstdio>
#include <random>
#include <string>
#include <vector>

#include "tests/measure/signals.hpp"

namespace tramline::measure {
namespace {

using storage::EventEnd;
using storage::EventKind;
using storage::Interval;
using namespace testing;

constexpr std::int64_t kTenMinutesNs = 600 * kNsPerSecond;

/// Every figure of an output, to the last bit.
std::string every_bit_of(const MeterOutput& out) {
  std::string text;
  const auto put = [&](auto... values) {
    const double row[] = {static_cast<double>(values)...};
    for (const double value : row) {
      char one[40];
      std::snprintf(one, sizeof one, "%a ", value);
      text += one;
    }
    text += '\n';
  };
  for (const HalfCycle& h : out.half_cycles) {
    put(h.channel_index, h.value.begin, h.value.end, h.value.u_rms_v, h.value.free_running, h.begin.value,
        h.window_ns);
  }
  for (const EventMark& m : out.events) {
    put(m.after, m.ended, m.begin, m.end, static_cast<int>(m.event.kind), m.event.extreme_v,
        m.event.duration_ns, m.event.phases);
  }
  for (const auto& a : records_of<storage::Aggregate>(out)) {
    put(static_cast<int>(a.interval), static_cast<int>(a.channel.side), a.begin.value, a.end.value, a.u_rms_v,
        a.u_min_v, a.u_max_v, a.blocks, a.measured_ns, a.flagged, a.partial);
  }
  for (const auto& f : records_of<storage::Frequency>(out))
    put(f.begin.value, f.hz, f.cycles, f.trusted, f.flagged);
  for (const auto& c : records_of<storage::CoverageProgress>(out))
    put(c.until.value, c.measured_ns);
  for (const auto& w : records_of<storage::Waveform>(out)) {
    put(w.begin_sample.value, w.begin.value, w.end.value);
    for (const auto& trace : w.traces) {
      put(trace.volts_per_step, trace.steps.size());
      for (const std::int16_t step : trace.steps)
        put(step);
    }
  }
  return text;
}

/// Two channels with a sag, an interruption, a swell, harmonics, drift and noise in 35 s.
std::vector<std::vector<float>> eventful() {
  std::mt19937 random(7);
  std::vector<std::vector<float>> channels(2, std::vector<float>(static_cast<std::size_t>(35.0 * kRate)));
  double angle = 0.3;
  for (std::size_t n = 0; n < channels[0].size(); ++n) {
    const double t = static_cast<double>(n) / kRate;
    angle += 2.0 * std::numbers::pi * (50.0 + 0.2 * std::sin(t / 3.0)) / kRate;
    double level = 1.0 + 0.01 * std::sin(t);
    if (t > 4.0033 && t < 4.31) level = 0.62;
    if (t > 12.0 && t < 12.9) level = 0.0;
    if (t > 20.0 && t < 26.5) level = 1.17;
    const double noise = static_cast<double>(random() % 1000) / 1000.0;
    const double volts = level * 325.0 * (std::sin(angle) + 0.05 * std::sin(5.0 * angle)) + noise;
    channels[0][n] = static_cast<float>(volts);
    channels[1][n] = static_cast<float>(volts * 1.1 + 0.2 * noise);
  }
  return channels;
}

TEST(Meter, GivesTheSameRecordsForTheSameSamplesHoweverTheyAreCut) {
  const auto channels = eventful();
  const config::Site site = site_of(kInputAndOutput);
  const UtcNs begin{kTenMinutesNs - 17 * kNsPerSecond};  // a ten-minute tick falls in
  const std::string whole = every_bit_of(metered(
      site, channels, [&] { return channels[0].size(); }, kRate, begin));
  EXPECT_GT(whole.size(), 10000U);
  for (const std::size_t cut : {7U, 64U, 1000U, 2049U}) {
    EXPECT_EQ(whole, every_bit_of(metered(
                         site, channels, [=] { return cut; }, kRate, begin)))
        << cut;
  }
  for (const unsigned seed : {1U, 2U, 3U, 4U, 5U}) {
    std::mt19937 random(seed);
    const auto cut = [&] { return std::size_t{1} + random() % (seed % 2 == 0 ? 5000 : 300); };
    EXPECT_EQ(whole, every_bit_of(metered(site, channels, cut, kRate, begin))) << seed;
  }
  const std::vector<std::vector<float>> head = {{channels[0].begin(), channels[0].begin() + 40000},
                                                {channels[1].begin(), channels[1].begin() + 40000}};
  EXPECT_EQ(every_bit_of(metered(
                site, head, [] { return std::size_t{1}; }, kRate, begin)),
            every_bit_of(metered(
                site, head, [] { return std::size_t{40000}; }, kRate, begin)));
}

TEST(Meter, AnEventAcrossATenMinuteTickAndMidnightIsOneEvent) {
  const UtcNs begin{86400 * kNsPerSecond - 2 * kNsPerSecond};
  const auto out =
      metered(site_of(kOneInput), {sampled(sine(230.0, 50.0, between(1.0, 3.0, 0.5)), 5.0)}, kRate, begin);
  const auto events = ended_events(out);
  ASSERT_EQ(events.size(), 1U);
  EXPECT_NEAR(static_cast<double>(events[0].duration_ns) / 1e9, 2.0, 0.02);
  EXPECT_NEAR(static_cast<double>(events[0].begin - begin) / 1e9, 1.0, 0.02);
}

/// Blocks with the frames [gap_from, gap_to) left out.
MeterOutput with_gap(const std::vector<float>& volts, std::size_t gap_from, std::size_t gap_to) {
  Meter meter(site_of(kOneInput), {UtcNs{0}, kRate, "test"});
  MeterOutput out;
  meter.take(block_of({volts}, 0, gap_from), out);
  Block after = block_of({volts}, gap_to, volts.size());
  after.gap = GapCause::samples_lost;
  meter.take(after, out);
  meter.finish(EventEnd::stopped, "end of test", out);
  return out;
}

TEST(Meter, MissingSamplesMakeNoEventAndAreNotCountedAsMeasured) {
  const auto out = with_gap(sampled(sine(230.0, 50.0), 10.0), 32000, 32128);
  EXPECT_TRUE(out.events.empty());
  const auto begins = records_of<storage::CoverageBegin>(out);
  const auto ends = records_of<storage::CoverageEnd>(out);
  ASSERT_EQ(begins.size(), 2U);
  ASSERT_EQ(ends.size(), 2U);
  EXPECT_EQ(ends[0].measured_ns, 5 * kNsPerSecond);
  EXPECT_EQ(ends[0].why, "samples lost: 128 samples (20 ms)");
  EXPECT_EQ(begins[1].begin.value, 5 * kNsPerSecond + 20 * kNsPerMillisecond);
  EXPECT_EQ(ends[1].measured_ns, 5 * kNsPerSecond - 20 * kNsPerMillisecond);
  for (const HalfCycle& h : out.half_cycles) {
    EXPECT_NEAR(h.value.u_rms_v, 230.0, 0.05);
    EXPECT_FALSE(h.value.begin < 32000.0 && h.value.end > 32128.0);
  }
}

TEST(Meter, AnEventUnderWayAtAGapIsClosedThereAndBeginsAnewAfterIt) {
  const auto out = with_gap(sampled(sine(230.0, 50.0, between(2.0, 8.0, 0.5)), 10.0), 32000, 33280);
  const auto events = ended_events(out);
  ASSERT_EQ(events.size(), 2U);
  EXPECT_EQ(events[0].end_reason, EventEnd::gap);
  EXPECT_LE(events[0].end.value, 5 * kNsPerSecond);
  EXPECT_EQ(events[1].end_reason, EventEnd::recovered);
  EXPECT_GE(events[1].begin.value, 5 * kNsPerSecond + 200 * kNsPerMillisecond);
}

TEST(Meter, ASwellAtTheSensorsLimitIsALowerBound) {
  const auto clipped = [](double t) {
    return std::clamp(sine(230.0, 50.0, between(1.0, 1.5, 1.6))(t), -400.0, 400.0);
  };
  const auto volts = sampled(clipped, 3.0);
  Block block = block_of({volts}, 0, volts.size());
  for (std::size_t n = 0; n < volts.size(); ++n) {
    if (std::abs(volts[n]) >= 400.0F) block.over_range.push_back({0, n, 1});
  }
  Meter meter(site_of(kOneInput), {UtcNs{0}, kRate, "test"});
  MeterOutput out;
  meter.take(block, out);
  meter.finish(EventEnd::stopped, "end of test", out);
  const auto events = ended_events(out);
  ASSERT_EQ(events.size(), 1U);
  EXPECT_EQ(events[0].kind, EventKind::swell);
  EXPECT_TRUE(events[0].extreme_is_bound);
  EXPECT_LT(events[0].extreme_v, 1.6 * 230.0);
}

TEST(Meter, AClipOfOneCycleOfASoundVoltageMakesNoFalseSag) {
  const auto volts = sampled(sine(230.0, 50.0), 3.0);
  Block block = block_of({volts}, 0, volts.size());
  block.over_range.push_back({0, 6400, 128});
  Meter meter(site_of(kOneInput), {UtcNs{0}, kRate, "test"});
  MeterOutput out;
  meter.take(block, out);
  meter.finish(EventEnd::stopped, "end of test", out);
  EXPECT_TRUE(out.events.empty());
}

TEST(Meter, ASourceThatSetsTheClockLeavesARecordAndDurationsUntouched) {
  const auto volts = sampled(sine(230.0, 50.0, between(1.0, 3.0, 0.5)), 4.0);
  Meter meter(site_of(kOneInput), {UtcNs{0}, kRate, "test"});
  MeterOutput out;
  meter.take(block_of({volts}, 0, 12800), out);
  Block second = block_of({volts}, 12800, volts.size());
  second.anchor = ClockAnchor{{12800}, UtcNs{3602 * kNsPerSecond}, kRate};
  meter.take(second, out);
  meter.finish(EventEnd::stopped, "end of test", out);
  const auto changes = records_of<storage::ClockChange>(out);
  ASSERT_EQ(changes.size(), 1U);
  EXPECT_EQ(changes[0].step_ns, 3600 * kNsPerSecond);
  const auto events = ended_events(out);
  ASSERT_EQ(events.size(), 1U);
  EXPECT_NEAR(static_cast<double>(events[0].duration_ns) / 1e9, 2.0, 0.02);
}

}  // namespace
}  // namespace tramline::measure
