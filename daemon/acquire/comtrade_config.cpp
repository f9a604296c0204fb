#include <algorithm>
#include <cctype>
#include <chrono>
#include <cmath>
#include <utility>

#include "daemon/acquire/comtrade.hpp"
#include "daemon/acquire/recording.hpp"

// Line by line as in IEEE C37.111-1999 and -2013, clause 7 (from memory, checked on files of other programs).
namespace tramline::acquire {
namespace {

constexpr std::int64_t kMostChannels = 10000;
constexpr std::int64_t kMostSections = 100000;
constexpr std::int64_t kMostSamples = 1'000'000'000'000;

/// The fields of the configuration's lines, one line after the other.
class ConfigLines {
 public:
  explicit ConfigLines(LineReader& lines) : lines_(lines) {}

  /// The next line, with at least `least` fields; `what` it should be is said if it is not there.
  Result<bool> next(std::size_t least, const char* what) {
    std::string_view line;
    const auto more = lines_.next(line);
    if (!more) return more.error();
    if (!more.value() || line.starts_with("---"))
      return error(std::string("the configuration ends where ") + what + " should stand",
                   "the file is cut short");
    split(line, ',', fields_);
    if (fields_.size() < least)
      return error(std::string("too few fields for ") + what, std::to_string(least) + " at least");
    return true;
  }
  [[nodiscard]] std::string_view field(std::size_t i) const {
    return i < fields_.size() ? fields_[i] : std::string_view();
  }
  [[nodiscard]] std::size_t count() const { return fields_.size(); }
  [[nodiscard]] Error error(std::string what, std::string remedy) const {
    return {lines_.where(), std::move(what), std::move(remedy)};
  }

 private:
  LineReader& lines_;
  std::vector<std::string_view> fields_;
};

/// A count with a letter behind it, such as 4A.
bool counted(std::string_view text, char letter, std::int64_t& count) {
  if (text.empty() || std::toupper(static_cast<unsigned char>(text.back())) != letter) return false;
  text.remove_suffix(1);
  return parse_integer(text, count);
}

/// An offset from UTC such as -4, +10h30, 0; in minutes.
std::optional<int> offset_minutes(std::string_view text) {
  int sign = 1;
  if (!text.empty() && (text.front() == '+' || text.front() == '-')) {
    sign = text.front() == '-' ? -1 : 1;
    text.remove_prefix(1);
  }
  const std::size_t h = text.find('h');
  std::int64_t hours = 0;
  std::int64_t minutes = 0;
  if (!parse_integer(text.substr(0, h), hours) || hours > 14) return std::nullopt;
  if (h != std::string_view::npos && h + 1 < text.size() &&
      (!parse_integer(text.substr(h + 1), minutes) || minutes > 59))
    return std::nullopt;
  return sign * static_cast<int>(hours * 60 + minutes);
}

/// Date and time of day; the 1991 revision writes the month first.
std::optional<UtcNs> instant(std::string_view date, std::string_view time, bool month_first,
                             bool& nanoseconds) {
  std::vector<std::string_view> d;
  std::vector<std::string_view> t;
  split(date, '/', d);
  split(time, ':', t);
  std::int64_t day = 0;
  std::int64_t month = 0;
  std::int64_t year = 0;
  std::int64_t hour = 0;
  std::int64_t minute = 0;
  if (d.size() != 3 || t.size() != 3 || !parse_integer(d[month_first ? 1 : 0], day) ||
      !parse_integer(d[month_first ? 0 : 1], month) || !parse_integer(d[2], year) ||
      !parse_integer(t[0], hour) || !parse_integer(t[1], minute)) {
    return std::nullopt;
  }
  if (year < 100) year += year < 70 ? 2000 : 1900;
  const std::size_t dot = t[2].find('.');
  std::int64_t second = 0;
  if (!parse_integer(t[2].substr(0, dot), second)) return std::nullopt;
  std::int64_t ns = 0;
  if (dot != std::string_view::npos) {
    std::string digits(t[2].substr(dot + 1));
    nanoseconds = digits.size() > 6;
    digits.resize(9, '0');
    if (!parse_integer(digits, ns) || ns < 0) return std::nullopt;
  }
  using namespace std::chrono;
  const year_month_day ymd{std::chrono::year(static_cast<int>(year)),
                           std::chrono::month(static_cast<unsigned>(month)),
                           std::chrono::day(static_cast<unsigned>(day))};
  if (year < 1970 || year > 2199 || day < 1 || month < 1 || !ymd.ok() || hour < 0 || hour > 23 ||
      minute < 0 || minute > 59 || second < 0 || second > 60) {
    return std::nullopt;
  }
  const std::int64_t days = sys_days(ymd).time_since_epoch().count();
  return UtcNs{((days * 24 + hour) * 60 + minute) * 60 * kNsPerSecond + second * kNsPerSecond + ns};
}

Status read_first_lines(ConfigLines& in, ComtradeConfig& config) {
  if (auto got = in.next(1, "the station line"); !got) return got.error();
  config.station = displayable(in.field(0));
  config.stated_revision = std::string(in.field(2));
  std::int64_t year = 1991;
  if (!in.field(2).empty() && !parse_integer(in.field(2), year))
    return in.error("\"" + displayable(in.field(2)) + "\" is no revision year", "1991, 1999 or 2013");
  config.revision = year <= 1991 ? 1991 : year < 2013 ? 1999 : 2013;

  if (auto got = in.next(3, "the numbers of channels"); !got) return got.error();
  std::int64_t total = 0;
  std::int64_t analog = 0;
  std::int64_t status = 0;
  if (!parse_integer(in.field(0), total) || !counted(in.field(1), 'A', analog) ||
      !counted(in.field(2), 'D', status) || analog < 0 || status < 0 || total != analog + status) {
    return in.error("the numbers of channels do not add up", "such as 6,4A,2D");
  }
  if (analog == 0)
    return in.error("there are no analog channels", "a recording of voltages has at least one");
  if (total > kMostChannels) return in.error(std::to_string(total) + " channels", "10000 at most are read");
  config.status_channels = static_cast<std::size_t>(status);
  config.analog.resize(static_cast<std::size_t>(analog));
  return kDone;
}

Status read_channels(ConfigLines& in, ComtradeConfig& config) {
  for (ComtradeConfig::Analog& analog : config.analog) {
    if (auto got = in.next(10, "an analog channel"); !got) return got.error();
    analog.name = displayable(in.field(1));
    analog.phase = displayable(in.field(2));
    analog.unit = displayable(in.field(4));
    if (!parse_number(in.field(5), analog.a))
      return in.error("the multiplier of channel " + analog.name + " is no number", "the sixth field is a");
    if (!in.field(6).empty() && !parse_number(in.field(6), analog.b))
      return in.error("the offset of channel " + analog.name + " is no number", "the seventh field is b");
    if (!parse_number(in.field(9), analog.raw_max)) analog.raw_max = 0.0;
    if (config.revision == 1991) continue;
    if (!in.field(10).empty() && !parse_number(in.field(10), analog.primary))
      return in.error("the primary factor of channel " + analog.name + " is no number", "");
    if (!in.field(11).empty() && !parse_number(in.field(11), analog.secondary))
      return in.error("the secondary factor of channel " + analog.name + " is no number", "");
    const std::string_view side = in.field(12);
    analog.is_primary = !side.empty() && (side.front() == 'P' || side.front() == 'p');
  }
  for (std::size_t i = 0; i < config.status_channels; ++i) {
    if (auto got = in.next(1, "a status channel"); !got) return got.error();
  }
  return kDone;
}

Status read_sections(ConfigLines& in, ComtradeConfig& config) {
  if (auto got = in.next(1, "the line frequency"); !got) return got.error();
  if (auto got = in.next(1, "the number of sample rates"); !got) return got.error();
  std::int64_t count = 0;
  if (!parse_integer(in.field(0), count) || count < 0 || count > kMostSections)
    return in.error("the number of sample rates cannot be read", "0, 1 or more");
  std::int64_t last = 0;
  for (std::int64_t i = 0; i < std::max<std::int64_t>(count, 1); ++i) {
    if (auto got = in.next(2, "a sample rate and its last sample"); !got) return got.error();
    ComtradeConfig::Section section;
    if (!parse_number(in.field(0), section.rate_hz) || !parse_integer(in.field(1), section.last))
      return in.error("a sample rate or its last sample cannot be read", "such as 6400,1280");
    config.samples = section.last;
    if (count == 0) break;
    if (!(section.rate_hz > 0.0) || section.rate_hz > kHighestRateHz) {
      return in.error("a sample rate of " + std::string(in.field(0)) + " Hz", "up to 1 MHz can be measured");
    }
    if (section.last > kMostSamples)
      return in.error(std::string(in.field(1)) + " samples", "10^12 at most are read");
    if (section.last <= last)
      return in.error("a section ends before it begins", "the numbers of the last samples must rise");
    last = section.last;
    config.sections.push_back(section);
  }
  return kDone;
}

Status read_rest(ConfigLines& in, ComtradeConfig& config) {
  if (auto got = in.next(2, "the time of the first sample"); !got) return got.error();
  config.begin = instant(in.field(0), in.field(1), config.revision == 1991, config.nanosecond_stamps);
  if (auto got = in.next(2, "the time of the trigger"); !got) return got.error();
  if (auto got = in.next(1, "the kind of the data file"); !got) return got.error();
  std::string kind(in.field(0));
  std::transform(kind.begin(), kind.end(), kind.begin(),
                 [](unsigned char c) { return static_cast<char>(std::toupper(c)); });
  if (kind == "ASCII") {
    config.data = ComtradeConfig::Data::ascii;
  } else if (kind == "BINARY") {
    config.data = ComtradeConfig::Data::binary16;
  } else if (kind == "BINARY32") {
    config.data = ComtradeConfig::Data::binary32;
  } else if (kind == "FLOAT32") {
    config.data = ComtradeConfig::Data::float32;
  } else {
    return in.error("\"" + displayable(kind) + "\" is no kind of data file",
                    "ASCII, BINARY, BINARY32 or FLOAT32");
  }
  if (config.revision == 1991) return kDone;
  if (auto got = in.next(1, "the time multiplier"); !got) return kDone;  // many programs leave it out
  if (!parse_number(in.field(0), config.stamp_multiplier) || !(config.stamp_multiplier > 0.0))
    config.stamp_multiplier = 1.0;
  if (config.revision < 2013) return kDone;
  if (auto got = in.next(1, "the time code"); !got) return kDone;
  if (const auto minutes = offset_minutes(in.field(0))) {
    config.zone_known = true;
    if (config.begin) *config.begin = *config.begin - static_cast<std::int64_t>(*minutes) * 60 * kNsPerSecond;
  }
  return kDone;
}

}  // namespace

Result<ComtradeConfig> read_comtrade_config(LineReader& lines) {
  ComtradeConfig config;
  ConfigLines in(lines);
  for (const auto part : {read_first_lines, read_channels, read_sections, read_rest}) {
    if (auto done = part(in, config); !done) return done.error();
  }
  return config;
}

}  // namespace tramline::acquire
