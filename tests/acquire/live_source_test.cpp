#include "daemon/acquire/live_source.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <atomic>
#include <cmath>
#include <limits>
#include <memory>
#include <utility>
#include <vector>

#include "live.hpp"

namespace tramline::acquire {
namespace {

using measure::AnchorCause;
using measure::GapCause;
using testing::ElementsAre;

/// What the device is to give, in order; a frame's value is its number.
struct Step {
  std::int64_t first = 0;
  std::size_t frames = 0;
  double at_s = 0.0;         // monotonic, of the last frame
  double utc_ahead_s = 1e9;  // of the monotonic clock
  GapCause gap = GapCause::samples_lost;
  std::vector<std::int64_t> nan = {};  // frames without a number
  std::vector<std::int64_t> limit = {};
};

class Scripted : public Device {
 public:
  /// With `taken` it stays less than two seconds ahead of what was taken from it.
  Scripted(std::vector<Step> steps, double rate_hz, double readings_every_s = 0.0,
           std::shared_ptr<std::atomic<std::int64_t>> taken = nullptr)
      : steps_(std::move(steps)), rate_hz_(rate_hz), every_s_(readings_every_s), taken_(std::move(taken)) {}
  Result<StreamInfo> open(const std::atomic<bool>&) override {
    StreamInfo info;
    info.what = "scripted device";
    info.rate_hz = rate_hz_;
    info.readings_every_s = every_s_;
    return info;
  }
  Result<bool> read(Arrival& arrival, std::chrono::milliseconds) override {
    if (next_ == steps_.size()) return Error{"scripted device", "unplugged", "plug it in"};
    if (taken_ && static_cast<double>(steps_[next_].first - *taken_) > 2.0 * rate_hz_) {
      std::this_thread::yield();
      return false;
    }
    const Step& step = steps_[next_++];
    arrival.first = step.first;
    arrival.frames = step.frames;
    arrival.gap = step.gap;
    for (std::size_t i = 0; i < step.frames; ++i) {
      const std::int64_t number = step.first + static_cast<std::int64_t>(i);
      const bool nan = std::find(step.nan.begin(), step.nan.end(), number) != step.nan.end();
      arrival.values.push_back(nan ? std::numeric_limits<float>::quiet_NaN() : static_cast<float>(number));
      arrival.values.push_back(-static_cast<float>(number));
      if (std::find(step.limit.begin(), step.limit.end(), number) != step.limit.end())
        arrival.over_range.push_back({0, i, 1});
    }
    arrival.monotonic_ns = std::llround(step.at_s * 1e9);
    arrival.utc_ns = std::llround((step.at_s + step.utc_ahead_s) * 1e9);
    return true;
  }

 private:
  std::vector<Step> steps_;
  double rate_hz_;
  double every_s_;
  std::shared_ptr<std::atomic<std::int64_t>> taken_;
  std::size_t next_ = 0;
};

std::vector<config::ChannelSettings> channels() {
  return {{{Side::input, Phase::l1}, "", 2.0, 1.0, 0.0}, {{Side::output, Phase::l1}, "", 1.0, 0.0, 0.0}};
}

std::unique_ptr<LiveSource> source_of(std::vector<Step> steps, double rate_hz = 1000.0,
                                      double every_s = 0.0) {
  return std::make_unique<LiveSource>(std::make_unique<Scripted>(std::move(steps), rate_hz, every_s),
                                      channels());
}

TEST(LiveSource, ScalesAndHandsOnWhatTheDeviceGave) {
  const auto source = source_of({{100, 10, 5.0}, {110, 10, 5.01}});
  ASSERT_FALSE(await_ready(*source));
  EXPECT_EQ(source->info().what, "scripted device");
  EXPECT_TRUE(source->info().live);
  EXPECT_TRUE(source->info().dated);
  Taken taken;
  take(*source, 20, taken);
  ASSERT_EQ(taken.index.size(), 20U);
  for (std::size_t i = 0; i < 20; ++i) {
    EXPECT_EQ(taken.index[i], static_cast<std::int64_t>(i));  // sample 0 is the first that came
    EXPECT_EQ(taken.volts[0][i], (100.0F + static_cast<float>(i) + 1.0F) * 2.0F);
    EXPECT_EQ(taken.volts[1][i], -(100.0F + static_cast<float>(i)));
  }
  EXPECT_TRUE(taken.gaps.empty());
}

TEST(LiveSource, PlacesTheFirstSampleByTheClocksOfItsArrival) {
  // The tenth of ten samples at 1000 Hz is there at 5.000 s: the first was 9 ms earlier.
  const auto source = source_of({{0, 10, 5.0}});
  ASSERT_FALSE(await_ready(*source));
  EXPECT_EQ(source->info().begin.value, 1'000'000'004'991'000'000);
}

TEST(LiveSource, GivesTheSameFramesHoweverFewAreAskedForAtATime) {
  for (const std::size_t most : {1U, 3U, 10U, 1000U}) {
    const auto source = source_of({{0, 7, 1.0}, {7, 7, 1.007}, {20, 5, 1.02}});
    ASSERT_FALSE(await_ready(*source));
    Taken taken;
    take(*source, 19, taken, most);
    ASSERT_EQ(taken.index.size(), 19U) << most;
    EXPECT_EQ(taken.index[13], 13);
    EXPECT_EQ(taken.index[14], 20);
    EXPECT_THAT(taken.gaps, ElementsAre(GapCause::samples_lost));
    EXPECT_EQ(source->health().lost_frames, 6);
    EXPECT_EQ(source->health().frames, 19);
  }
}

TEST(LiveSource, MakesAGapOfFramesWithoutANumber) {
  const auto source = source_of({{0, 10, 1.0, 1e9, GapCause::samples_lost, {4, 5}}});
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 8, taken);
  EXPECT_THAT(taken.index, ElementsAre(0, 1, 2, 3, 6, 7, 8, 9));
  EXPECT_THAT(taken.gaps, ElementsAre(GapCause::not_a_number));
}

TEST(LiveSource, PassesOnWhatTheDeviceSaysOfItsLimits) {
  const auto source = source_of({{0, 10, 1.0, 1e9, GapCause::samples_lost, {}, {3, 4}},
                                 {10, 10, 1.01, 1e9, GapCause::samples_lost, {}, {12}}});
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 20, taken, 7);
  EXPECT_THAT(taken.over_range, ElementsAre(3, 4, 12));
  EXPECT_EQ(source->health().over_range_frames, 3);
}

TEST(LiveSource, HoldsTheSitesOwnLimitAgainstVolts) {
  auto limited = channels();
  limited[0].range_v = 30.0;  // (14 + 1) * 2
  LiveSource source(std::make_unique<Scripted>(std::vector<Step>{{0, 17, 1.0}}, 1000.0), limited);
  ASSERT_FALSE(await_ready(source));
  Taken taken;
  take(source, 17, taken);
  EXPECT_THAT(taken.over_range, ElementsAre(14, 15, 16));
}

TEST(LiveSource, LeavesOutFramesThatCameAlready) {
  const auto source = source_of({{0, 10, 1.0}, {5, 10, 1.01}});
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 15, taken);
  for (std::size_t i = 0; i < 15; ++i)
    EXPECT_EQ(taken.index[i], static_cast<std::int64_t>(i));
}

TEST(LiveSource, HandsOutEverythingThatCameBeforeTheDeviceFailed) {
  const auto source = source_of({{0, 10, 1.0}, {10, 10, 1.01}});
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 1000, taken);
  EXPECT_EQ(taken.index.size(), 20U);
  ASSERT_TRUE(taken.error);
  EXPECT_EQ(taken.error->text(), "scripted device: unplugged; plug it in");
}

TEST(LiveSource, SaysWhyItCannotBeOpened) {
  const auto source = source_of({});
  const auto error = await_ready(*source);
  ASSERT_TRUE(error);
  EXPECT_EQ(error->what, "unplugged");
}

TEST(LiveSource, SaysTheTimeAnewAsTheRateBecomesKnown) {
  // 1000.05 Hz instead of 1000 Hz: 50 ppm.
  std::vector<Step> steps;
  for (std::int64_t i = 0; i < 3000; ++i)
    steps.push_back({i * 20, 20, static_cast<double>((i + 1) * 20) / 1000.05});
  const auto so_far = std::make_shared<std::atomic<std::int64_t>>(0);
  const auto source = std::make_unique<LiveSource>(
      std::make_unique<Scripted>(std::move(steps), 1000.0, 0.0, so_far), channels());
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  while (!taken.error) {
    take(*source, taken.index.size() + 500, taken);
    *so_far = static_cast<std::int64_t>(taken.index.size());
  }
  ASSERT_EQ(taken.index.size(), 60'000U);
  ASSERT_GE(taken.anchors.size(), 6U);
  std::int64_t last = 0;
  for (const auto& anchor : taken.anchors) {
    EXPECT_EQ(anchor.cause, AnchorCause::refined);
    EXPECT_LE(anchor.at.value - last, 10'500);
    last = anchor.at.value;
  }
  EXPECT_NEAR(taken.anchors.back().rate_hz, 1000.05, 0.001);
  // Sample n is there when n + 1 were counted.
  const auto& anchor = taken.anchors.back();
  const double true_s = static_cast<double>(anchor.at.value + 1) / 1000.05;
  EXPECT_NEAR(static_cast<double>(anchor.utc.value) / 1e9 - 1e9, true_s, 1e-5);
  EXPECT_NEAR(source->health().rate_hz, 1000.05, 0.001);
}

TEST(LiveSource, TellsAtOnceWhenTheUtcClockIsSet) {
  std::vector<Step> steps;
  for (std::int64_t i = 0; i < 25; ++i)
    steps.push_back({i * 20, 20, static_cast<double>((i + 1) * 20) / 1000.0, i < 12 ? 1e9 : 1e9 + 3600.0});
  const auto source = source_of(std::move(steps));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 500, taken);
  ASSERT_EQ(taken.anchors.size(), 1U);
  EXPECT_EQ(taken.anchors[0].cause, AnchorCause::clock_set);
  EXPECT_EQ(taken.anchors[0].at.value, 240);
  EXPECT_NEAR(static_cast<double>(taken.anchors[0].utc.value) / 1e9, 1e9 + 3600.241, 1e-6);
  EXPECT_TRUE(taken.gaps.empty());
}

TEST(LiveSource, DropsAndCountsWhatNobodyTakes) {
  std::vector<Step> steps;
  for (std::int64_t i = 0; i < 100; ++i)
    steps.push_back({i * 100, 100, static_cast<double>((i + 1) * 100) / 1000.0});
  const auto source = source_of(std::move(steps));
  // The device gives all it has while nobody takes anything: only 4 s of frames are kept. Asking for the
  // number dropped waits until it is done.
  while (source->health().overrun_frames < 6000)
    std::this_thread::yield();
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 100'000, taken);
  EXPECT_EQ(taken.index.size(), 4000U);
  EXPECT_EQ(source->health().overrun_frames, 6000);
}

TEST(LiveSource, CountsWhatTheDeviceSaysItDidNotTakeInTime) {
  const auto source = source_of({{0, 10, 1.0}, {35, 10, 1.045, 1e9, GapCause::overrun}});
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 20, taken);
  EXPECT_THAT(taken.gaps, ElementsAre(GapCause::overrun));
  EXPECT_EQ(source->health().overrun_frames, 25);
  EXPECT_EQ(source->health().lost_frames, 0);
}

TEST(LiveSource, GivesReadingsOfAMeterOneByOneAndWithoutGaps) {
  const auto source =
      source_of({{0, 1, 10.0}, {1001, 1, 11.001}, {1999, 1, 11.999}, {5000, 1, 15.0}}, 1000.0, 1.0);
  ASSERT_FALSE(await_ready(*source));
  EXPECT_EQ(source->info().readings_every_s, 1.0);
  EXPECT_EQ(source->info().begin.value, 1'000'000'010'000'000'000);
  measure::Block block;
  for (const std::int64_t at : {0, 1001, 1999, 5000}) {
    do {
      ASSERT_TRUE(source->next(block, 100));
    } while (block.frames() == 0);
    EXPECT_EQ(block.frames(), 1U);
    EXPECT_EQ(block.first.value, at);
    EXPECT_EQ(block.gap, GapCause::none);
    EXPECT_FALSE(block.anchor);
    EXPECT_EQ(block.channel(0).front(), (static_cast<float>(at) + 1.0F) * 2.0F);
    EXPECT_EQ(block.channel(1).front(), 0.0F);  // of an r.m.s. value less than nothing is nothing
  }
}

}  // namespace
}  // namespace tramline::acquire
