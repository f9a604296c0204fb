#pragma once

#include <string>
#include <string_view>

namespace tramline::config {

/// The least a site file needs.
inline const std::string kLeastSite =
    "site: {name: Test, nominal_v: 230, frequency_hz: 50}\n"
    "channels: [{side: input}, {side: output}]\n"
    "source: {kind: simulator}\n";

inline const std::string kRegulator = "regulator: {target_v: 230, band_pct: 3, input_v: [170, 270]}\n";

/// kLeastSite with a regulator and other text for its source.
inline std::string site_with_source(std::string_view source) {
  return "site: {name: Test, nominal_v: 230, frequency_hz: 50}\n"
         "channels: [{side: input}, {side: output}]\n" +
         kRegulator + "source: " + std::string(source) + "\n";
}

/// A three-phase site with other channels.
inline std::string three_phases_with(std::string_view channels) {
  return "site: {name: Test, nominal_v: 230, frequency_hz: 50, phases: 3}\n"
         "source: {kind: simulator}\n"
         "channels:\n" +
         std::string(channels);
}

}  // namespace tramline::config
