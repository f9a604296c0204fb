#pragma once

#include <memory>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// Opens a recording: WAV, CSV or COMTRADE, by its settings or else by the file's name. `channels` say which
/// of its columns are wanted, by number from 1 or by name, and how they become volts: (raw + offset) * scale.
///
/// Recordings are streamed, so they may be larger than memory. What is missing in them becomes gaps, never
/// volts; a file that ends early gives what it has, and its `end_remark()` says so. A header that cannot be
/// understood is an Error with its place. One thread.
[[nodiscard]] Result<std::unique_ptr<Source>> open_recording(
    const config::RecordingSettings& settings, const std::vector<config::ChannelSettings>& channels);

/// The lowest and highest sample rates a recording may have: the measurement needs six samples a cycle at
/// least.
inline constexpr double kLowestRateHz = 360.0;
inline constexpr double kHighestRateHz = 1.0e6;
/// The longest stretch of time a recording may claim to span; what claims more is damaged.
inline constexpr double kLongestRecordingSeconds = 20.0 * 366.0 * 86400.0;
/// An Error if `rate_hz` is outside; `where` is the file, with the place in it.
[[nodiscard]] Status check_rate(double rate_hz, const std::string& where);

/// For each wanted channel the index, from 0, of its column among `names`. `names` may be empty strings.
[[nodiscard]] Result<std::vector<std::size_t>> columns_for(
    const std::vector<config::ChannelSettings>& channels, const std::vector<std::string>& names,
    const std::string& where);

}  // namespace tramline::acquire
