#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>

#include "config/calibration.hpp"

/// The calibration of a channel in words and as JSON, in one place for every command.
namespace tramline::tools {

/// "2026-03-01", as clocks in `zone` show it.
[[nodiscard]] std::string day_text(UtcNs t, const std::string& zone);

/// "calibrated 2026-03-01; 220 V is good for ±1.2 V (k = 2, about 95 %); due 2027-03-01", and "PAST DUE since
/// 2027-03-01" if it was due before `now`.
[[nodiscard]] std::string calibration_words(const config::ChannelCalibration& calibration, double nominal_v,
                                            const std::string& zone, UtcNs now);

/// Volts with as many decimals as two digits of an uncertainty take: "1.2", "0.031".
[[nodiscard]] std::string uncertainty_text(double volts);

/// The figures of a calibration; `past_due` is as of `now`.
[[nodiscard]] nlohmann::ordered_json json_of(const config::ChannelCalibration& calibration, double nominal_v,
                                             UtcNs now);

}  // namespace tramline::tools
