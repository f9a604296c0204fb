#pragma once

#include <cstdint>
#include <nlohmann/json_fwd.hpp>

#include "storage/records.hpp"

/// Records as JSON: times in UTC (ISO 8601), durations in seconds, volts; what was not measured is null. The
/// keys are documented in tramline(1).
namespace tramline::tools {

[[nodiscard]] inline double seconds(std::int64_t ns) {
  return static_cast<double>(ns) / 1e9;
}

[[nodiscard]] nlohmann::ordered_json json_of(const storage::Event& event);

}  // namespace tramline::tools
