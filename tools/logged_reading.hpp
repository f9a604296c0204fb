#pragma once

#include "config/result.hpp"
#include "config/site.hpp"
#include "storage/logbook_reader.hpp"
#include "tools/calibration_figures.hpp"

namespace tramline::tools {

/// The logger's own value of `now.channel` around `at`, out of its logbook, as it would be shown with `now`,
/// the scale and calibration in force now: whatever was in force then is undone.
///
/// It is the root of the mean of the squares of the 3-s values that touch the 6 s before and after. Error if
/// there is none at that time; if one is flagged, partial or over-range; or if they differ by more than twice
/// `allowed_v`, so that two meters that were not read at the same instant cannot be compared. The Error's
/// `where` is left to the caller.
[[nodiscard]] Result<SensorReading> logged_reading(const storage::LogbookReader& reader, UtcNs at,
                                                   double reference_v, double allowed_v,
                                                   const config::ChannelSettings& now);

/// Settings of a channel, calibration included, as they were in force at a time (at the end, without one).
/// Nothing: the logbook's site had no such channel.
[[nodiscard]] Result<std::optional<config::ChannelSettings>> channel_in_force(
    const storage::LogbookReader& reader, Channel channel, std::optional<UtcNs> at);

}  // namespace tramline::tools
