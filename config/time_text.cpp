#include "config/time_text.hpp"

#include <date/date.h>
#include <date/tz.h>

#include <algorithm>
#include <chrono>
#include <cmath>
#include <cstddef>
#include <cstdio>
#include <optional>
#include <stdexcept>
#include <utility>

#include "config/fault.hpp"

namespace tramline::config {
namespace {

constexpr std::int64_t kNsPerMinute = 60 * kNsPerSecond;
constexpr std::int64_t kNsPerHour = 60 * kNsPerMinute;
constexpr std::int64_t kNsPerDay = 24 * kNsPerHour;
constexpr int kFirstYear = 1970;
constexpr int kLastYear = 2199;
constexpr std::int64_t kLongestDays = 36'500;

bool is_digit(char c) {
  return c >= '0' && c <= '9';
}

/// A text being read from the front. What does not fit is left standing.
class Cursor {
 public:
  explicit Cursor(std::string_view text) : rest_(text) {}

  [[nodiscard]] bool at_end() const { return rest_.empty(); }
  [[nodiscard]] bool at_digit() const { return !rest_.empty() && is_digit(rest_.front()); }

  bool take(char c) {
    if (rest_.empty() || rest_.front() != c) return false;
    rest_.remove_prefix(1);
    return true;
  }
  void skip_spaces() {
    while (take(' ')) {
    }
  }
  /// Exactly `count` digits.
  std::optional<int> number(std::size_t count) {
    if (rest_.size() < count) return std::nullopt;
    int value = 0;
    for (std::size_t i = 0; i < count; ++i) {
      if (!is_digit(rest_[i])) return std::nullopt;
      value = value * 10 + (rest_[i] - '0');
    }
    rest_.remove_prefix(count);
    return value;
  }
  std::string_view take_digits() { return take_while(is_digit); }
  std::string_view take_letters() {
    return take_while([](char c) { return c >= 'a' && c <= 'z'; });
  }

 private:
  template <class Belongs>
  std::string_view take_while(Belongs belongs) {
    const auto end = std::find_if_not(rest_.begin(), rest_.end(), belongs);
    const std::string_view taken = rest_.substr(0, static_cast<std::size_t>(end - rest_.begin()));
    rest_.remove_prefix(taken.size());
    return taken;
  }

  std::string_view rest_;
};

/// What an ISO 8601 text says, before a zone gives it a place in time.
struct WrittenTime {
  date::local_seconds local{};
  std::int64_t fraction_ns = 0;
  std::optional<std::chrono::minutes> offset;
};

/// Either the time, or in words what is wrong with it.
struct Reading {
  WrittenTime time;
  std::string wrong;
};

Reading wrong(std::string why) {
  return {{}, std::move(why)};
}

std::int64_t fraction_in_ns(std::string_view digits) {
  std::int64_t ns = 0;
  for (std::size_t i = 0; i < 9; ++i)
    ns = ns * 10 + (i < digits.size() ? digits[i] - '0' : 0);
  return ns;
}

/// `Z` or `+hh[[:]mm]` at the cursor.
std::optional<std::chrono::minutes> read_offset(Cursor& cursor) {
  if (cursor.take('Z') || cursor.take('z')) return std::chrono::minutes(0);
  const bool west = cursor.take('-');
  if (!west && !cursor.take('+')) return std::nullopt;
  const auto hours = cursor.number(2);
  if (!hours || *hours > 15) return std::nullopt;
  std::optional<int> minutes = 0;
  if (cursor.take(':') || cursor.at_digit()) minutes = cursor.number(2);
  if (!minutes || *minutes > 59) return std::nullopt;
  const std::chrono::minutes offset(*hours * 60 + *minutes);
  return west ? -offset : offset;
}

Reading read_time(std::string_view text) {
  Cursor cursor(text);
  const auto year = cursor.number(4);
  const bool dash = cursor.take('-');
  const auto month = cursor.number(2);
  const bool dash_again = cursor.take('-');
  const auto day = cursor.number(2);
  if (!year || !dash || !month || !dash_again || !day) return wrong("it does not begin with a date");
  if (*year < kFirstYear || *year > kLastYear) {
    return wrong("the year is not between " + std::to_string(kFirstYear) + " and " +
                 std::to_string(kLastYear));
  }
  const date::year_month_day ymd{date::year(*year), date::month(static_cast<unsigned>(*month)),
                                 date::day(static_cast<unsigned>(*day))};
  if (!ymd.ok()) return wrong("there is no such day");
  Reading reading;
  reading.time.local = date::local_days(ymd);
  if (cursor.at_end()) return reading;

  if (!cursor.take('T') && !cursor.take('t') && !cursor.take(' '))
    return wrong("no time of day follows the date");
  const auto hour = cursor.number(2);
  const bool colon = cursor.take(':');
  const auto minute = cursor.number(2);
  if (!hour || !colon || !minute) return wrong("the time of day is not hh:mm or hh:mm:ss");
  std::optional<int> second = 0;
  if (cursor.take(':')) {
    second = cursor.number(2);
    if (!second) return wrong("the seconds are not two digits");
    if (cursor.take('.') || cursor.take(',')) {
      const std::string_view digits = cursor.take_digits();
      if (digits.empty()) return wrong("no digits follow the decimal point");
      reading.time.fraction_ns = fraction_in_ns(digits);
    }
  }
  if (*hour > 23) return wrong("the hour is not between 00 and 23");
  if (*minute > 59) return wrong("the minute is not between 00 and 59");
  if (*second == 60) return wrong("a leap second is not counted in UTC nanoseconds");
  if (*second > 59) return wrong("the second is not between 00 and 59");
  reading.time.local +=
      std::chrono::hours(*hour) + std::chrono::minutes(*minute) + std::chrono::seconds(*second);

  cursor.skip_spaces();
  if (cursor.at_end()) return reading;
  reading.time.offset = read_offset(cursor);
  if (!reading.time.offset) return wrong("what follows the time of day is no offset");
  if (!cursor.at_end()) return wrong("something follows the offset");
  return reading;
}

std::string quoted(std::string_view text) {
  std::string line(1, '"');
  line += shown(text);
  line += '"';
  return line;
}

UtcNs at_offset(const WrittenTime& time, std::chrono::seconds offset) {
  const std::chrono::seconds since_epoch = time.local.time_since_epoch() - offset;
  return UtcNs{since_epoch.count() * kNsPerSecond + time.fraction_ns};
}

/// nullptr if unknown, or if there is no time zone database: the library throws for both.
const date::time_zone* find_zone(std::string_view zone) {
  try {
    return date::locate_zone(zone);
  } catch (const std::runtime_error&) {
    return nullptr;
  }
}

std::string offset_text(std::chrono::seconds offset) {
  const auto minutes = std::chrono::duration_cast<std::chrono::minutes>(offset).count();
  const auto size = minutes < 0 ? -minutes : minutes;
  char text[24];
  std::snprintf(text, sizeof text, "%c%02d:%02d", minutes < 0 ? '-' : '+', static_cast<int>(size / 60),
                static_cast<int>(size % 60));
  return text;
}

/// "2026-03-01" + `between` + "06:00:00.123"
std::string date_and_time(date::local_seconds local, std::int64_t fraction_ns, char between, int decimals) {
  const auto day = date::floor<date::days>(local);
  const date::year_month_day ymd(day);
  const date::hh_mm_ss<std::chrono::seconds> clock(local - day);
  char text[64];
  int length =
      std::snprintf(text, sizeof text, "%04d-%02u-%02u%c%02d:%02d:%02d", static_cast<int>(ymd.year()),
                    static_cast<unsigned>(ymd.month()), static_cast<unsigned>(ymd.day()), between,
                    static_cast<int>(clock.hours().count()), static_cast<int>(clock.minutes().count()),
                    static_cast<int>(clock.seconds().count()));
  std::string line(text, static_cast<std::size_t>(length));
  decimals = std::clamp(decimals, 0, 9);
  if (decimals > 0) {
    length = std::snprintf(text, sizeof text, ".%09lld", static_cast<long long>(fraction_ns));
    line.append(text, static_cast<std::size_t>(std::min(length, decimals + 1)));
  }
  return line;
}

struct SplitInstant {
  std::chrono::seconds since_epoch;
  std::int64_t fraction_ns;
};

/// Rounds down, also before 1970, and stands every value.
SplitInstant split(UtcNs t) {
  const std::int64_t rest = t.value % kNsPerSecond;
  const std::int64_t borrowed = rest < 0 ? 1 : 0;
  return {std::chrono::seconds(t.value / kNsPerSecond - borrowed), rest + borrowed * kNsPerSecond};
}

struct DurationUnit {
  std::string_view name;
  std::int64_t ns;
};
constexpr DurationUnit kDurationUnits[] = {{"d", kNsPerDay},    {"h", kNsPerHour},
                                           {"m", kNsPerMinute}, {"min", kNsPerMinute},
                                           {"s", kNsPerSecond}, {"ms", kNsPerMillisecond}};

std::optional<std::int64_t> unit_ns(std::string_view name) {
  for (const DurationUnit& unit : kDurationUnits) {
    if (unit.name == name) return unit.ns;
  }
  return std::nullopt;
}

}  // namespace

Result<UtcNs> parse_utc(std::string_view text) {
  const char* remedy =
      "write a time with its offset from UTC, such as 2026-03-01T06:00:00+05:30 or 2026-03-01T00:30:00Z";
  const Reading reading = read_time(text);
  if (!reading.wrong.empty()) return Error{quoted(text), reading.wrong, remedy};
  if (!reading.time.offset) return Error{quoted(text), "the offset from UTC is missing", remedy};
  return at_offset(reading.time, *reading.time.offset);
}

Result<UtcNs> parse_time(std::string_view text, std::string_view zone) {
  const Reading reading = read_time(text);
  if (!reading.wrong.empty()) {
    return Error{quoted(text), reading.wrong,
                 "write a date or a time, such as 2026-03-01, 2026-03-01T06:00 or 2026-03-01T06:00:00+05:30"};
  }
  if (reading.time.offset) return at_offset(reading.time, *reading.time.offset);
  const date::time_zone* found = find_zone(zone);
  if (found == nullptr) {
    return Error{quoted(text), "there is no time zone " + shown(zone),
                 "write the time with its offset from UTC"};
  }
  try {
    const date::local_info info = found->get_info(reading.time.local);
    if (info.result == date::local_info::nonexistent) {
      return Error{quoted(text), "clocks in " + shown(zone) + " skip this time as they go forward",
                   "write the time with its offset from UTC"};
    }
    if (info.result == date::local_info::ambiguous) {
      return Error{quoted(text), "clocks in " + shown(zone) + " show this time twice",
                   "add " + offset_text(info.first.offset) + " for the first or " +
                       offset_text(info.second.offset) + " for the second"};
    }
    return at_offset(reading.time, info.first.offset);
  } catch (const std::runtime_error& damaged) {
    return Error{quoted(text), "the time zone " + shown(zone) + " cannot be read: " + damaged.what(),
                 "write the time with its offset from UTC"};
  }
}

std::string format_utc(UtcNs t, int decimals) {
  const SplitInstant instant = split(t);
  return date_and_time(date::local_seconds(instant.since_epoch), instant.fraction_ns, 'T', decimals) + "Z";
}

std::string format_in_zone(UtcNs t, std::string_view zone, int decimals) {
  const SplitInstant instant = split(t);
  std::chrono::seconds offset{0};
  if (const date::time_zone* found = find_zone(zone)) {
    try {
      offset = found->get_info(date::sys_seconds(instant.since_epoch)).offset;
    } catch (const std::runtime_error&) {
      // A damaged zone file: UTC, and the offset says so.
    }
  }
  return date_and_time(date::local_seconds(instant.since_epoch + offset), instant.fraction_ns, ' ',
                       decimals) +
         " " + offset_text(offset);
}

bool zone_known(std::string_view zone) {
  return find_zone(zone) != nullptr;
}

std::vector<std::string> zone_names() {
  std::vector<std::string> names;
  try {
    for (const date::time_zone& zone : date::get_tzdb().zones)
      names.emplace_back(zone.name());
  } catch (const std::runtime_error&) {
    names.clear();
  }
  std::sort(names.begin(), names.end());
  return names;
}

Result<std::int64_t> parse_duration(std::string_view text) {
  const auto refused = [&](std::string why) {
    return Error{quoted(text), std::move(why),
                 "write a duration such as 2h 5m, 1.5s or 200ms; a number alone is seconds"};
  };
  Cursor cursor(text);
  cursor.skip_spaces();
  if (cursor.at_end()) return refused("it is empty");
  double fraction_ns = 0.0;
  std::int64_t whole_ns = 0;
  std::int64_t smaller_than = kNsPerDay + 1;
  bool first = true;
  bool fraction_seen = false;
  while (!cursor.at_end()) {
    if (fraction_seen) return refused("only its last number may have a fraction");
    const std::string_view whole = cursor.take_digits();
    std::string_view fraction;
    if (whole.empty()) return refused("a number is missing");
    if (cursor.take('.')) {
      fraction = cursor.take_digits();
      if (fraction.empty()) return refused("no digits follow the decimal point");
      fraction_seen = true;
    }
    cursor.skip_spaces();
    const std::string_view name = cursor.take_letters();
    const bool plain_seconds = name.empty() && first && cursor.at_end();
    const auto unit = plain_seconds ? kNsPerSecond : unit_ns(name);
    if (!unit) return refused(name.empty() ? "a unit is missing" : "the unit is not d, h, m, min, s or ms");
    if (*unit >= smaller_than) return refused("its units do not go from larger to smaller");
    smaller_than = *unit;
    constexpr std::size_t kMostDigits = 15;
    std::int64_t count = 0;
    if (whole.size() > kMostDigits) return refused("it is longer than 36500 days");
    for (const char c : whole)
      count = count * 10 + (c - '0');
    if (count > kLongestDays * kNsPerDay / *unit) return refused("it is longer than 36500 days");
    whole_ns += count * *unit;
    fraction_ns = static_cast<double>(fraction_in_ns(fraction)) * 1e-9 * static_cast<double>(*unit);
    if (whole_ns > kLongestDays * kNsPerDay) return refused("it is longer than 36500 days");
    cursor.skip_spaces();
    first = false;
  }
  return whole_ns + std::llround(fraction_ns);
}

std::string format_duration(std::int64_t ns) {
  if (ns == 0) return "0 s";
  const auto magnitude = ns < 0 ? 0 - static_cast<std::uint64_t>(ns) : static_cast<std::uint64_t>(ns);
  const auto second = static_cast<std::uint64_t>(kNsPerSecond);
  const auto rounded_to = [](std::uint64_t value, std::uint64_t step) { return (value + step / 2) / step; };
  const auto two_units = [](std::uint64_t large, const char* large_unit, std::uint64_t small,
                            const char* small_unit) {
    std::string two = std::to_string(large);
    two.append(" ").append(large_unit);
    if (small > 0) two.append(" ").append(std::to_string(small)).append(" ").append(small_unit);
    return two;
  };
  std::string text = ns < 0 ? "-" : "";

  // Rounded before the unit is chosen, so that 59.96 s becomes 1 min and not 60.0 s.
  std::uint64_t step = 1;
  while (magnitude / step >= 1000)
    step *= 10;
  const std::uint64_t three_digits = rounded_to(magnitude, step) * step;
  if (three_digits < 60 * second) {
    const bool seconds = three_digits >= second;
    const bool milliseconds = three_digits >= second / 1000;
    const double unit = seconds ? 1e9 : milliseconds ? 1e6 : 1e3;
    char number[32];
    std::snprintf(number, sizeof number, "%.3g", static_cast<double>(three_digits) / unit);
    return text + number + (seconds ? " s" : milliseconds ? " ms" : " µs");
  }
  const std::uint64_t s = rounded_to(magnitude, second);
  if (s < 3600) return text + two_units(s / 60, "min", s % 60, "s");
  const std::uint64_t minutes = rounded_to(magnitude, 60 * second);
  if (minutes < std::uint64_t{24 * 60}) return text + two_units(minutes / 60, "h", minutes % 60, "min");
  const std::uint64_t hours = rounded_to(magnitude, 3600 * second);
  return text + two_units(hours / 24, "d", hours % 24, "h");
}

}  // namespace tramline::config
