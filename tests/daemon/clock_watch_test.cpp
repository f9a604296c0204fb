#include "daemon/clock_watch.hpp"

#include <gtest/gtest.h>

namespace tramline {
namespace {

using storage::ClockState;
using storage::ClockTrust;

KernelClock kernel(bool unsynchronised, double max_error_s, double at_s) {
  return {true, unsynchronised, static_cast<std::int64_t>(max_error_s * 1e9),
          static_cast<std::int64_t>(at_s * 1e9)};
}

TEST(ClockWatch, ClaimsNoBoundForAClockThatNobodySet) {
  ClockWatch watch({});
  // At boot the kernel says unsynchronised and 16 s, whatever the clock shows.
  EXPECT_EQ(watch.look(kernel(true, 16.0, 10.0)), (ClockState{ClockTrust::never_set, -1}));
  EXPECT_EQ(watch.look({}), (ClockState{ClockTrust::never_set, -1}));
}

TEST(ClockWatch, TakesTheKernelsBoundWhileItIsSteered) {
  ClockWatch watch({});
  EXPECT_EQ(watch.look(kernel(false, 0.004, 10.0)), (ClockState{ClockTrust::synchronised, 4'000'000}));
}

TEST(ClockWatch, IsInHoldoverLongBeforeTheKernelGivesUp) {
  // 500 ppm of growth (kernel/time/ntp.c): after 8 h the bound is 14.4 s and the kernel still says
  // synchronised.
  ClockWatch watch({});
  EXPECT_EQ(watch.look(kernel(false, 0.004, 0.0)).trust, ClockTrust::synchronised);
  EXPECT_EQ(watch.look(kernel(false, 14.404, 28'800.0)), (ClockState{ClockTrust::holdover, 14'404'000'000}));
}

TEST(ClockWatch, LetsTheBoundGrowAfterTheKernelHasGivenUp) {
  ClockWatch watch({});
  (void)watch.look(kernel(false, 0.010, 1000.0));
  const ClockState hour_later = watch.look(kernel(true, 16.0, 4600.0));
  EXPECT_EQ(hour_later.trust, ClockTrust::holdover);
  EXPECT_EQ(hour_later.error_bound_ns, 10'000'000 + 1'800'000'000);  // 1.8 s an hour
  const ClockState steered_again = watch.look(kernel(false, 0.002, 5000.0));
  EXPECT_EQ(steered_again, (ClockState{ClockTrust::synchronised, 2'000'000}));
}

TEST(ClockWatch, BelievesTheSitesOwnWordWhereItIsGiven) {
  ClockWatch watch({0.5});
  EXPECT_EQ(watch.look(kernel(true, 16.0, 10.0)), (ClockState{ClockTrust::synchronised, 500'000}));
}

TEST(ClockWords, SayWhatKeepsTheClockAndHowWell) {
  EXPECT_EQ(clock_words({ClockTrust::synchronised, 4'000'000}), "synchronised, within 4 ms");
  EXPECT_EQ(clock_words({ClockTrust::holdover, 1'300'000'000}), "in holdover, within 1.3 s");
  EXPECT_EQ(clock_words({}), "never set: its error is not known");
}

TEST(KernelClock, AnswersWithoutPrivilege) {
  const KernelClock clock = kernel_clock();
  EXPECT_TRUE(clock.known);
  EXPECT_GT(clock.monotonic_ns, 0);
}

}  // namespace
}  // namespace tramline
