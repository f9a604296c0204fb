#include "daemon/clock_watch.hpp"

#include <sys/timex.h>
#include <time.h>

#include <cmath>

#include "config/time_text.hpp"

namespace tramline {
namespace {

constexpr std::int64_t kSteeredBoundNs = kNsPerSecond;
constexpr double kDrift = 500e-6;  // the kernel's allowance for a clock that nobody steers

}  // namespace

KernelClock kernel_clock() {
  timex state{};
  const int answer = adjtimex(&state);
  timespec now{};
  clock_gettime(CLOCK_MONOTONIC, &now);
  KernelClock clock;
  clock.known = answer >= 0;
  clock.unsynchronised = answer == TIME_ERROR || (state.status & STA_UNSYNC) != 0;
  clock.max_error_ns = std::int64_t{state.maxerror} * 1000;  // maxerror is in microseconds
  clock.monotonic_ns = std::int64_t{now.tv_sec} * kNsPerSecond + now.tv_nsec;
  return clock;
}

storage::ClockState ClockWatch::look(const KernelClock& clock) {
  using storage::ClockTrust;
  if (settings_.stated_error_ms)
    return {ClockTrust::synchronised, std::llround(*settings_.stated_error_ms * 1e6)};
  if (clock.known && !clock.unsynchronised) {
    last_bound_ = {clock.max_error_ns, clock.monotonic_ns};
    const bool steered = clock.max_error_ns <= kSteeredBoundNs;
    return {steered ? ClockTrust::synchronised : ClockTrust::holdover, clock.max_error_ns};
  }
  if (!last_bound_) return {};
  const auto since = static_cast<double>(clock.monotonic_ns - last_bound_->monotonic_ns);
  return {ClockTrust::holdover, last_bound_->error_ns + std::llround(kDrift * since)};
}

std::string clock_words(const storage::ClockState& state) {
  const std::string within =
      state.error_bound_ns >= 0 ? ", within " + config::format_duration(state.error_bound_ns) : "";
  switch (state.trust) {
    case storage::ClockTrust::synchronised:
      return "synchronised" + within;
    case storage::ClockTrust::holdover:
      return "in holdover" + within;
    case storage::ClockTrust::never_set:
      break;
  }
  return "never set: its error is not known";
}

}  // namespace tramline
