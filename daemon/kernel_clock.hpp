#pragma once

#include "storage/records.hpp"

namespace tramline {

/// What the kernel says of its UTC clock: whether it is synchronised, and the bound on its error
/// (adjtimex(2), `maxerror`). Needs no privilege.
[[nodiscard]] storage::ClockState kernel_clock_state();

}  // namespace tramline
