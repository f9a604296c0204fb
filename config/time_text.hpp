#pragma once

#include <cstdint>
#include <string>
#include <string_view>
#include <vector>

#include "config/result.hpp"
#include "config/units.hpp"

/// Instants and durations as people write and read them: ISO 8601 with an offset, IANA time zones, "2h 5m".
///
/// All functions may be called from any thread. An Error has in `where` the text that was refused, in quotes,
/// in `what` the reason and in `remedy` the notation that is understood.
namespace tramline::config {

/// An instant from ISO 8601: `2026-03-01T06:00:00+05:30`.
///
/// Date and time of day are parted by `T` or a space; seconds may be left out or have a fraction (digits
/// beyond the nanosecond are dropped); the offset is `Z`, `+hh:mm`, `+hhmm` or `+hh`, with or without a space
/// before it, and must be there. Years 1970 to 2199. A leap second (`23:59:60`) is refused: UTC nanoseconds
/// do not count it.
Result<UtcNs> parse_utc(std::string_view text);

/// The same, but without an offset the text is read as what clocks show in `zone`, and a date alone is its
/// midnight.
///
/// Error too if no clock there shows that time, or shows it twice, when daylight saving begins or ends; or if
/// there is no such zone.
Result<UtcNs> parse_time(std::string_view text, std::string_view zone);

/// `2026-03-01T06:00:00.123Z`, for programs. `decimals` of a second, 0 to 9; what lies beyond is cut off, so
/// that no instant moves into the next second.
std::string format_utc(UtcNs t, int decimals = 3);

/// `2026-03-01 11:30:00.123 +05:30`, for people. In UTC, offset `+00:00`, if there is no such zone. The
/// offset is always the one applied; daylight saving is known up to 2037, and standard time is applied
/// beyond.
std::string format_in_zone(UtcNs t, std::string_view zone, int decimals = 3);

/// Whether the machine's time zone database knows `zone` ("Asia/Kolkata", "UTC").
bool zone_known(std::string_view zone);

/// All names it knows, sorted; empty if there is no database.
std::vector<std::string> zone_names();

/// Nanoseconds of a duration: `2h 5m`, `12 min 30 s`, `1.5s`, `200ms`, or a number alone, which is seconds.
///
/// Units are d, h, m or min, s, ms, each at most once and the larger before the smaller; spaces are free.
/// Only the last number may have a fraction. From 0 to 36500 days.
Result<std::int64_t> parse_duration(std::string_view text);

/// A duration for people, to three digits or the two largest units: `8.33 ms`, `1.62 s`, `12 min 30 s`, `3 h
/// 12 min`, `2 d 5 h`. `parse_duration()` reads all but microseconds and negative ones back.
std::string format_duration(std::int64_t ns);

}  // namespace tramline::config
