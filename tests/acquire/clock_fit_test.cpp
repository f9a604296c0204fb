#include "daemon/acquire/clock_fit.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <cstdint>
#include <random>

namespace tramline::acquire {
namespace {

constexpr std::int64_t kSecond = 1'000'000'000;
constexpr std::int64_t kBegin = 123 * kSecond;

/// Blocks of 128 samples at `true_hz`, each `latency_ms` late and sometimes much later, as a busy machine
/// does it.
class Arrivals {
 public:
  Arrivals(double true_hz, double latency_ms, double often_late_ms, double share_very_late,
           double very_late_ms)
      : true_hz_(true_hz),
        latency_ms_(latency_ms),
        late_(1.0 / std::max(often_late_ms, 1e-9)),
        share_(share_very_late),
        very_late_ms_(very_late_ms) {}
  void into(ClockFit& fit, double seconds) {
    for (; static_cast<double>(samples_) < seconds * true_hz_;) {
      samples_ += 128;
      const double true_ms = static_cast<double>(samples_) / true_hz_ * 1e3;
      double late_ms = latency_ms_ + late_(random_);
      if (unit_(random_) < share_) late_ms += very_late_ms_ * unit_(random_);
      // Blocks do not overtake each other.
      last_ = std::max<std::int64_t>(last_ + 1, kBegin + std::llround((true_ms + late_ms) * 1e6));
      fit.take(samples_, last_);
    }
  }
  [[nodiscard]] std::int64_t samples() const { return samples_; }

 private:
  std::mt19937 random_{7};
  std::uniform_real_distribution<double> unit_{0.0, 1.0};
  double true_hz_;
  double latency_ms_;
  std::exponential_distribution<double> late_;
  double share_;
  double very_late_ms_;
  std::int64_t samples_ = 0;
  std::int64_t last_ = 0;
};

double ppm(double hz, double true_hz) {
  return (hz / true_hz - 1.0) * 1e6;
}

TEST(ClockFit, TakesTheNominalRateUntilItKnowsBetter) {
  ClockFit fit(6400.0);
  fit.take(128, kBegin);
  EXPECT_FALSE(fit.measured());
  EXPECT_DOUBLE_EQ(fit.rate_hz(), 6400.0);
  EXPECT_EQ(fit.time_of(128), kBegin);
  EXPECT_EQ(fit.time_of(128 + 6400), kBegin + kSecond);
}

TEST(ClockFit, FindsTheTrueRateExactlyWhenNothingIsLate) {
  ClockFit fit(6400.0);
  Arrivals(6400.0 * (1.0 + 37e-6), 2.0, 0.0, 0.0, 0.0).into(fit, 60.0);
  EXPECT_NEAR(ppm(fit.rate_hz(), 6400.0), 37.0, 0.01);
  EXPECT_LT(fit.rate_error_ppm(), 0.01);
  EXPECT_LT(fit.spread_ns(), 1000);
}

TEST(ClockFit, IsNotMisledByASchedulerThatIsOftenLate) {
  ClockFit fit(6400.0);
  Arrivals arrivals(6400.0 * (1.0 - 52e-6), 2.0, 1.0, 0.2, 40.0);
  arrivals.into(fit, 600.0);
  EXPECT_NEAR(ppm(fit.rate_hz(), 6400.0), -52.0, 0.5);
  // The time of a sample is that of the prompt arrivals, not of the mean ones.
  const double true_ms = static_cast<double>(arrivals.samples()) / (6400.0 * (1.0 - 52e-6)) * 1e3;
  EXPECT_NEAR(static_cast<double>(fit.time_of(arrivals.samples()) - kBegin) / 1e6 - true_ms, 2.0, 0.3);
}

TEST(ClockFit, LeavesOutAWholeMinuteInWhichEverythingCameLate) {
  ClockFit fit(6400.0);
  std::int64_t samples = 0;
  for (int i = 0; i < 60'000; ++i) {
    samples += 128;
    const bool busy = i > 30'000 && i < 33'000;
    fit.take(samples, kBegin + samples * kSecond / 6400 + (busy ? kSecond / 10 : 0));
  }
  EXPECT_NEAR(ppm(fit.rate_hz(), 6400.0), 0.0, 0.05);
}

TEST(ClockFit, SeesARateThatIsOnePercentWrongWithinSeconds) {
  ClockFit fit(6400.0);
  Arrivals(6464.0, 1.0, 0.2, 0.0, 0.0).into(fit, 4.0);
  ASSERT_TRUE(fit.measured());
  EXPECT_NEAR(fit.rate_hz() / 6400.0, 1.01, 2e-4);
}

TEST(ClockFit, FollowsAClockThatChangedHoursAgo) {
  ClockFit fit(1000.0);
  std::int64_t samples = 0;
  double ns = 0.0;
  for (int second = 0; second < 4 * 3600; ++second) {
    const double true_hz = second < 2 * 3600 ? 1000.0 : 1000.0 * (1.0 + 20e-6);
    samples += 1000;
    ns += 1000.0 / true_hz * 1e9;
    fit.take(samples, kBegin + std::llround(ns));
  }
  EXPECT_NEAR(ppm(fit.rate_hz(), 1000.0), 20.0, 0.1);
}

TEST(ClockFit, SaysAnUncertaintyThatCoversWhatItIsOffBy) {
  int covered = 0;
  for (unsigned seed = 0; seed < 40; ++seed) {
    std::mt19937 random(seed);
    std::exponential_distribution<double> late(1.0);
    ClockFit fit(6400.0);
    std::int64_t samples = 0;
    for (int i = 0; i < 15'000; ++i) {
      samples += 128;
      fit.take(samples, kBegin + samples * kSecond / 6400 + std::llround(late(random) * 1e6));
    }
    covered += std::abs(ppm(fit.rate_hz(), 6400.0)) <= 2.0 * fit.rate_error_ppm() ? 1 : 0;
  }
  EXPECT_GE(covered, 34);  // twice a standard uncertainty: about 95 %
}

}  // namespace
}  // namespace tramline::acquire
