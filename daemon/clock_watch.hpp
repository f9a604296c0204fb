#pragma once

#include <cstdint>
#include <optional>
#include <string>

#include "config/site.hpp"
#include "storage/records.hpp"

namespace tramline {

/// What the kernel says of its UTC clock (adjtimex(2)).
struct KernelClock {
  bool known = false;  ///< false: it did not answer
  bool unsynchronised = true;
  std::int64_t max_error_ns = 0;
  std::int64_t monotonic_ns = 0;  ///< when it was asked
};

/// Asks the kernel. Needs no privilege.
[[nodiscard]] KernelClock kernel_clock();

/// Follows the kernel's clock: synchronised, in holdover, or never set; and the bound on its error.
///
/// The kernel adds 500 ppm to its bound while nobody steers it, and says that it is unsynchronised only when
/// the bound has reached 16 s, hours later. So here it counts as synchronised while the bound is at most one
/// second (reached after half an hour without steering), and as in holdover from then on; after the kernel
/// has given up, the bound goes on growing by 500 ppm from the last one it gave. A clock that was never
/// synchronised while we looked has no bound at all: the kernel's 16 s are a limit of its field, not a
/// measurement. Where the site states the clock's error itself, that is believed instead. Pure. One thread.
class ClockWatch {
 public:
  explicit ClockWatch(const config::ClockSettings& settings) : settings_(settings) {}

  storage::ClockState look(const KernelClock& clock);

 private:
  config::ClockSettings settings_;
  struct Bound {
    std::int64_t error_ns;
    std::int64_t monotonic_ns;
  };
  std::optional<Bound> last_bound_;
};

/// "synchronised, within 4 ms", "in holdover, within 1.3 s", "never set: its error is not known"
[[nodiscard]] std::string clock_words(const storage::ClockState& state);

}  // namespace tramline
