#include "daemon/kernel_clock.hpp"

#include <sys/timex.h>

namespace tramline {

storage::ClockState kernel_clock_state() {
  timex state{};
  const int answer = adjtimex(&state);
  if (answer < 0) return {};
  // maxerror is in microseconds.
  return {answer != TIME_ERROR && (state.status & STA_UNSYNC) == 0,
          static_cast<std::int64_t>(state.maxerror) * 1000};
}

}  // namespace tramline
