#pragma once

#include <atomic>
#include <cstdint>
#include <string>

#include "config/result.hpp"

namespace tramline::acquire {

/// A connected socket, which the caller closes; it does not block. Tries each address of `host` for three
/// seconds and waits for a name server for ten. Looks at `stop` every 100 ms, and gives an Error then.
[[nodiscard]] Result<int> tcp_connect(const std::string& host, std::uint16_t port,
                                      const std::atomic<bool>& stop);

}  // namespace tramline::acquire
