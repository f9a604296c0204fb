#pragma once

#include <memory>

#include <spdlog/logger.h>

namespace tramline {

/// The daemon's log, to the error stream. Under journald each line begins with its priority (`<4>`), which
/// journald takes off again; elsewhere with the time and the level.
[[nodiscard]] std::shared_ptr<spdlog::logger> make_log();

}  // namespace tramline
