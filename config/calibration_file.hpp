#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "config/calibration.hpp"
#include "config/fault.hpp"
#include "config/map_reader.hpp"
#include "config/site.hpp"

/// The calibration file, which stands beside the site file. CALIBRATION-FILE.md describes its keys.
namespace tramline::config {

/// How far a gain may be from 1 and still be a calibration, not a wrong scale in the site file.
inline constexpr double kLowestGain = 0.8;
inline constexpr double kHighestGain = 1.2;
/// How many readings a channel's calibration keeps.
inline constexpr std::size_t kMostReadings = 100;

/// Where the calibration of a site is kept: `plant.yaml` has it in `plant.calibration.yaml`.
[[nodiscard]] std::string calibration_path(const std::string& site_path);

/// Reads the YAML `text` of a calibration file. Faults have their place, and name `file_name`; with faults,
/// what comes back is of no use. Pure.
[[nodiscard]] Calibration parse_calibration(std::string_view text, const std::string& file_name,
                                            Findings& findings);

/// Reads the same, checks that each entry belongs to a channel of `site` and was made with the scale and
/// offset it has, and puts it into the site. With faults `site`, which is the site file's own, stays as it
/// was.
void calibrate(Site& site, std::string_view text, const std::string& file_name, Findings& findings);

/// The text of a calibration file with these channels; `parse_calibration()` reads the same values back.
[[nodiscard]] std::string calibration_text(const std::vector<ChannelCalibration>& channels);

/// Every key a calibration file may hold, in the order of CALIBRATION-FILE.md.
[[nodiscard]] std::vector<KeyDescription> calibration_file_keys();

}  // namespace tramline::config
