#include "daemon/acquire/iio_stamps.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cstdint>
#include <deque>
#include <random>
#include <span>
#include <utility>
#include <vector>

namespace tramline::acquire {
namespace {

using testing::ElementsAre;
using testing::IsEmpty;
using testing::Pair;

constexpr std::int64_t kPeriod = 156'250;  // ns, of 6400 Hz
constexpr std::int64_t kBegin = 1'700'000'000'000'000'000;
constexpr std::size_t kWindow = 64;

/// Frame i at even distance.
std::vector<std::int64_t> even(std::size_t frames) {
  std::vector<std::int64_t> stamps;
  for (std::size_t i = 0; i < frames; ++i)
    stamps.push_back(kBegin + static_cast<std::int64_t>(i) * kPeriod);
  return stamps;
}

/// Takes away `missing` frames before what is then frame `before`.
void lose(std::vector<std::int64_t>& stamps, std::ptrdiff_t before, std::ptrdiff_t missing) {
  stamps.erase(stamps.begin() + before, stamps.begin() + before + missing);
}

using Found = std::vector<std::pair<std::int64_t, std::int64_t>>;

Found losses_in(const std::vector<std::int64_t>& stamps, std::size_t piece = 100, double period = kPeriod) {
  StampWatch watch(period, kWindow);
  std::deque<StampWatch::Loss> losses;
  for (std::size_t i = 0; i < stamps.size(); i += piece) {
    watch.take(std::span(stamps).subspan(i, std::min(piece, stamps.size() - i)), losses);
    EXPECT_EQ(
        watch.judged(),
        std::max<std::int64_t>(0, static_cast<std::int64_t>(std::min(i + piece, stamps.size()) - kWindow)));
  }
  watch.finish(losses);
  EXPECT_EQ(watch.judged(), static_cast<std::int64_t>(stamps.size()));
  Found found;
  for (const auto& loss : losses)
    found.emplace_back(loss.before, loss.missing);
  return found;
}

TEST(StampWatch, FindsHowManyFramesAreLostAndWhere) {
  for (const std::ptrdiff_t missing : {1, 2, 7, 640, 64'000}) {
    auto stamps = even(70'000);
    lose(stamps, 1234, missing);
    for (const std::size_t piece : {1U, 7U, 256U, 100'000U})
      EXPECT_THAT(losses_in(stamps, piece), ElementsAre(Pair(1234, missing)));
  }
}

TEST(StampWatch, FindsLossesCloseTogether) {
  auto stamps = even(3000);
  lose(stamps, 1000, 3);
  lose(stamps, 1002, 1);
  lose(stamps, 1030, 5);
  EXPECT_THAT(losses_in(stamps), ElementsAre(Pair(1000, 3), Pair(1002, 1), Pair(1030, 5)));
}

TEST(StampWatch, FindsALossAtTheVeryEnd) {
  auto stamps = even(1000);
  lose(stamps, 990, 2);
  EXPECT_THAT(losses_in(stamps), ElementsAre(Pair(990, 2)));
}

TEST(StampWatch, TakesALateStampForLateAndNotForALoss) {
  auto stamps = even(3000);
  stamps[500] += 30 * kPeriod;           // one alone
  for (std::int64_t i = 0; i < 20; ++i)  // twenty scans waited for the same interrupt
    stamps[static_cast<std::size_t>(1000 + i)] = kBegin + 1020 * kPeriod + i;
  EXPECT_THAT(losses_in(stamps), IsEmpty());
}

TEST(StampWatch, FindsEachLossAmongJitteringStamps) {
  std::mt19937 random(7);
  // Mostly prompt, sometimes several frames late.
  std::exponential_distribution<double> late(1.0 / (0.3 * kPeriod));
  auto stamps = even(200'000);
  for (auto& stamp : stamps)
    stamp += static_cast<std::int64_t>(late(random));
  lose(stamps, 50'000, 1);
  lose(stamps, 120'000, 11);
  const Found found = losses_in(stamps);
  ASSERT_EQ(found.size(), 2U);
  EXPECT_EQ(found[0].second, 1);
  EXPECT_NEAR(static_cast<double>(found[0].first), 50'000,
              1);  // the frame beside it may stand too late itself
  EXPECT_THAT(found[1], Pair(120'000, 11));
}

TEST(StampWatch, SaysThatALateFrameBeforeALossCameBeforeIt) {
  auto stamps = even(3000);
  lose(stamps, 1000, 1);
  stamps[999] += kPeriod * 6 / 10;  // so no two stamps are more than 1.5 periods apart
  EXPECT_THAT(losses_in(stamps), ElementsAre(Pair(1000, 1)));
}

TEST(StampWatch, BearsAClockThatIsOffByAThousandth) {
  auto stamps = even(500'000);
  lose(stamps, 400'000, 2);
  for (const double off : {0.999, 1.001})
    EXPECT_THAT(losses_in(stamps, 100, kPeriod * off), ElementsAre(Pair(400'000, 2)));
}

TEST(StampWatch, TakesAClockThatIsSetBackForNoLoss) {
  auto stamps = even(3000);
  for (std::size_t i = 1500; i < stamps.size(); ++i)
    stamps[i] -= 1'000'000'000;
  EXPECT_THAT(losses_in(stamps), IsEmpty());
}

TEST(StampWatch, SurvivesAnyBits) {
  std::mt19937_64 random(3);
  std::vector<std::int64_t> stamps(5000);
  for (auto& stamp : stamps)
    stamp = static_cast<std::int64_t>(random());
  for (const auto& [before, missing] : losses_in(stamps))
    EXPECT_GT(missing, 0);
}

TEST(StudyStamps, MeasuresTheDistanceInSpiteOfJitterAndLosses) {
  std::mt19937 random(5);
  std::exponential_distribution<double> late(1.0 / (0.3 * kPeriod));
  auto stamps = even(3300);
  for (auto& stamp : stamps)
    stamp += static_cast<std::int64_t>(late(random));
  stamps[100] += 1'000'000'000;
  lose(stamps, 2800, 100);
  const auto findings = study_stamps(stamps);
  EXPECT_TRUE(findings.one_a_frame);
  EXPECT_NEAR(findings.ns_a_frame, kPeriod, 0.001 * kPeriod);
}

TEST(StudyStamps, SeesStampsThatManyFramesShare) {
  auto stamps = even(3200);
  for (std::size_t i = 0; i < stamps.size(); ++i)
    stamps[i] = stamps[i / 32 * 32];
  EXPECT_FALSE(study_stamps(stamps).one_a_frame);
}

TEST(StudyStamps, TrustsNoStampsThatStandStillOrRunBack) {
  EXPECT_FALSE(study_stamps(std::vector<std::int64_t>(300, kBegin)).one_a_frame);
  EXPECT_FALSE(study_stamps(std::vector<std::int64_t>(300, 0)).one_a_frame);
  const auto stamps = even(300);
  EXPECT_FALSE(study_stamps(std::vector<std::int64_t>(stamps.rbegin(), stamps.rend())).one_a_frame);
  EXPECT_FALSE(study_stamps({}).one_a_frame);
}

}  // namespace
}  // namespace tramline::acquire
