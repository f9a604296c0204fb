#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>

#include "config/site.hpp"
#include "tools/calibration_figures.hpp"

/// A comparison with a reference, as it is told: pure.
namespace tramline::tools {

/// For people: each reading as found and as left, gain and offset, the uncertainty budget, what follows.
[[nodiscard]] std::string comparison_text(const CalibrationFigures& figures,
                                          const config::ChannelCalibration& entry, const config::Site& site);

/// For programs; `today` is for whether it is past due.
[[nodiscard]] nlohmann::ordered_json comparison_json(const CalibrationFigures& figures,
                                                     const config::ChannelCalibration& entry,
                                                     const config::Site& site, UtcNs today);

}  // namespace tramline::tools
