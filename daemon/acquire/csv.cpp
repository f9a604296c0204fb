#include "daemon/acquire/csv.hpp"

#include <algorithm>
#include <cmath>
#include <deque>
#include <optional>
#include <utility>

#include "config/time_text.hpp"
#include "daemon/acquire/byte_reader.hpp"
#include "daemon/acquire/recording.hpp"
#include "daemon/acquire/row_source.hpp"

namespace tramline::acquire {
namespace {

constexpr std::size_t kRowsToLookAt = 2000;
constexpr double kEpochSeconds = 1e8;
constexpr std::size_t kFewUneven = 4;
constexpr std::int64_t kAnchorEvery = 20000;  // rows

/// How the table is written, seen from its first row.
struct Dialect {
  char separator = ',';
  bool decimal_comma = false;
};

Dialect dialect_of(std::string_view line) {
  for (const char candidate : {'\t', ';'}) {
    if (line.find(candidate) != std::string_view::npos) return {candidate, true};
  }
  return {',', false};
}

struct TimeCell {
  double seconds = 0.0;  // since the first row's, or since 1970 if absolute
  std::int64_t utc_ns = 0;
  bool absolute = false;
};

/// A cell of the time column; nothing if it is no time.
std::optional<TimeCell> time_of(std::string_view cell, bool decimal_comma) {
  double number = 0.0;
  if (parse_number(cell, number, decimal_comma)) {
    const bool absolute = number > kEpochSeconds && number < 7.0e9;
    return TimeCell{number, absolute ? std::llround(number * 1e9) : 0, absolute};
  }
  const auto utc = config::parse_utc(cell);
  if (!utc) return std::nullopt;
  return TimeCell{static_cast<double>(utc.value().value) / 1e9, utc.value().value, true};
}

class CsvSource : public RowSource {
 public:
  CsvSource(LineReader lines, const std::vector<config::ChannelSettings>& channels)
      : RowSource(channels), lines_(std::move(lines)) {}

  Status start(const config::RecordingSettings& settings);

  [[nodiscard]] std::string end_remark() const override {
    std::string remark = torn_ ? "the file ends in the middle of a row, which was left out" : "end of file";
    if (missing_rows() > 0)
      remark += "; " + std::to_string(missing_rows()) + " rows held no number and were left out";
    return remark;
  }
  [[nodiscard]] double progress() const override { return lines_.progress(); }

 protected:
  Result<bool> read_row(Row& row) override;

 private:
  struct Line {
    std::string text;
    std::int64_t number;
    bool ended;
  };
  Result<bool> next_line(Line& line);
  Result<bool> line_from_file(Line& line);
  [[nodiscard]] Error error_at(std::int64_t line, std::string what, std::string remedy) const {
    return {lines_.path() + ":" + std::to_string(line), std::move(what), std::move(remedy)};
  }
  [[nodiscard]] bool is_header() const;
  Status find_time_column(const config::RecordingSettings& settings, const std::vector<std::string>& names);
  Status look_at_times();
  Status place(Row& row, std::string_view cell, std::int64_t line);

  LineReader lines_;
  std::deque<Line> ahead_;  // read while looking at the first rows
  Dialect dialect_;
  std::size_t width_ = 0;
  std::vector<std::size_t> columns_;
  std::optional<std::size_t> time_column_;
  std::vector<std::string_view> fields_;
  Line line_;
  std::int64_t index_ = -1;
  double first_s_ = 0.0;
  double last_s_ = 0.0;
  std::int64_t anchored_at_ = 0;
  bool absolute_ = false;
  bool torn_ = false;
  std::optional<Error> broken_;
};

Result<bool> CsvSource::next_line(Line& line) {
  if (!ahead_.empty()) {
    line = std::move(ahead_.front());
    ahead_.pop_front();
    return true;
  }
  return line_from_file(line);
}

Result<bool> CsvSource::line_from_file(Line& line) {
  std::string_view text;
  for (;;) {
    const auto more = lines_.next(text);
    if (!more || !more.value()) return more;
    if (lines_.line_number() == 1 && text.starts_with("\xEF\xBB\xBF")) text.remove_prefix(3);
    if (!text.empty() && text.front() != '#') break;
  }
  line.text.assign(text);
  line.number = lines_.line_number();
  line.ended = lines_.last_was_ended();
  return true;
}

bool CsvSource::is_header() const {
  // A header has a cell that is neither a number, nor a time, nor a way to say that there is none.
  return std::any_of(fields_.begin(), fields_.end(), [this](std::string_view cell) {
    std::string lower(cell);
    std::transform(lower.begin(), lower.end(), lower.begin(),
                   [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
    return !cell.empty() && lower != "nan" && lower != "na" && lower != "null" &&
           !time_of(cell, dialect_.decimal_comma);
  });
}

Status CsvSource::start(const config::RecordingSettings& settings) {
  for (std::size_t i = 0; i < kRowsToLookAt; ++i) {
    Line line;
    const auto more = line_from_file(line);
    if (!more) return more.error();
    if (!more.value()) break;
    ahead_.push_back(std::move(line));
  }
  if (ahead_.empty()) return Error{lines_.path(), "the file holds no rows", "name a recording"};

  dialect_ = dialect_of(ahead_.front().text);
  split(ahead_.front().text, dialect_.separator, fields_);
  width_ = fields_.size();
  std::vector<std::string> names(width_);
  if (is_header()) {
    for (std::size_t i = 0; i < width_; ++i)
      names[i] = std::string(fields_[i]);
    ahead_.pop_front();
    if (ahead_.empty())
      return Error{lines_.path(), "the file holds a header and no rows", "name a recording"};
  }
  if (auto found = find_time_column(settings, names); !found) return found;

  // Columns are counted without the time where no name or number says otherwise.
  auto wanted = channels_;
  for (std::size_t c = 0; c < wanted.size(); ++c) {
    if (wanted[c].source_channel.empty() && time_column_ && c >= *time_column_)
      wanted[c].source_channel = std::to_string(c + 2);
  }
  const auto columns = columns_for(wanted, names, lines_.path());
  if (!columns) return columns.error();
  columns_ = columns.value();

  info_.rate_hz = settings.rate_hz.value_or(0.0);
  if (time_column_) {
    if (auto seen = look_at_times(); !seen) return seen;
  }
  if (auto sound = check_rate(info_.rate_hz, lines_.path()); !sound) return sound;
  if (settings.begin) {
    info_.begin = *settings.begin;
    absolute_ = false;  // its own time only spaces the rows
  }
  info_.dated = settings.begin.has_value() || absolute_;
  char rate[32];
  std::snprintf(rate, sizeof rate, "%.6g", info_.rate_hz);
  info_.what = "text table " + lines_.path() + ", " + std::to_string(width_) + " columns, " + rate +
               " samples a second" + (time_column_ ? " by its time column" : " as given");
  return kDone;
}

Status CsvSource::find_time_column(const config::RecordingSettings& settings,
                                   const std::vector<std::string>& names) {
  if (!settings.time_column.empty()) {
    config::ChannelSettings as_channel;
    as_channel.source_channel = settings.time_column;
    const auto column = columns_for({as_channel}, names, lines_.path());
    if (!column) return column.error();
    time_column_ = column.value().front();
    return kDone;
  }
  if (settings.rate_hz) return kDone;
  split(ahead_.front().text, dialect_.separator, fields_);
  if (width_ < 2 || !time_of(fields_.front(), dialect_.decimal_comma)) {
    return Error{lines_.path(), "the first column holds no time, and no sample rate is given",
                 "give the rate, or name the time column"};
  }
  time_column_ = 0;
  return kDone;
}

Status CsvSource::look_at_times() {
  std::vector<double> times;
  std::int64_t first_ns = 0;
  for (const Line& line : ahead_) {
    split(line.text, dialect_.separator, fields_);
    if (fields_.size() != width_) continue;
    const auto time = time_of(fields_[*time_column_], dialect_.decimal_comma);
    if (!time)
      return error_at(line.number, "\"" + displayable(fields_[*time_column_]) + "\" is no time",
                      "seconds, or ISO 8601 with an offset; or name the time column");
    if (times.empty()) {
      first_ns = time->utc_ns;
      absolute_ = time->absolute;
    }
    times.push_back(time->seconds);
  }
  if (times.size() < 2)
    return Error{lines_.path(), "one row is not enough to see the sample rate", "give the rate"};
  std::vector<double> steps;
  for (std::size_t i = 1; i < times.size(); ++i)
    steps.push_back(times[i] - times[i - 1]);
  std::nth_element(steps.begin(), steps.begin() + static_cast<std::ptrdiff_t>(steps.size() / 2), steps.end());
  const double usual = steps[steps.size() / 2];
  if (!(usual > 0.0))
    return Error{lines_.path(), "the time does not advance from row to row",
                 "the time column must be finer than the sampling interval"};
  // Rounded stamps jitter; over many rows that averages out, with the gaps left out.
  double sum = 0.0;
  std::size_t count = 0;
  std::size_t uneven = 0;
  for (const double step : steps) {
    if (step > 0.5 * usual && step < 1.5 * usual) {
      sum += step;
      ++count;
    } else if (step > 0.0 && step < 2.5 * usual) {
      ++uneven;
    }
  }
  if (uneven > kFewUneven + steps.size() / 10) {
    return Error{
        lines_.path(),
        "the time steps unevenly from row to row, so that lost rows cannot be told from rounding",
        "the time column must be finer than the sampling interval; or give the rate, and no time column"};
  }
  info_.rate_hz = static_cast<double>(count) / sum;
  first_s_ = last_s_ = times.front();
  info_.begin = {absolute_ ? first_ns : 0};
  return kDone;
}

Status CsvSource::place(Row& row, std::string_view cell, std::int64_t line) {
  const auto time = time_of(cell, dialect_.decimal_comma);
  if (!time) return error_at(line, "\"" + displayable(cell) + "\" is no time", "every row needs its time");
  const double intervals = (time->seconds - last_s_) * info_.rate_hz;
  if (index_ >= 0 && !(intervals > 0.0)) {
    return error_at(line, intervals < 0.0 ? "the time goes backwards" : "the time does not advance",
                    "rows must come in the order of time");
  }
  std::int64_t advance = 1;
  if (intervals > 1.5) {
    if (time->seconds - first_s_ > kLongestRecordingSeconds)
      return error_at(line, "the time jumps by more than can be", "the file is damaged");
    advance = std::max<std::int64_t>(2, std::llround(intervals));
    row.gap = measure::GapCause::time_jump;
  }
  index_ = index_ < 0 ? 0 : index_ + advance;
  last_s_ = time->seconds;
  // Now and then, and after each gap, the row's own time takes over from counting.
  if (index_ > 0 && (advance > 1 || index_ - anchored_at_ >= kAnchorEvery)) {
    anchored_at_ = index_;
    const std::int64_t since_ns = std::llround((time->seconds - first_s_) * 1e9);
    row.anchor = measure::ClockAnchor{
        {index_}, absolute_ ? UtcNs{time->utc_ns} : info_.begin + since_ns, info_.rate_hz};
  }
  return kDone;
}

Result<bool> CsvSource::read_row(Row& row) {
  if (broken_) return *broken_;
  const auto more = next_line(line_);
  if (!more) broken_ = more.error();
  if (!more || !more.value()) return more;
  split(line_.text, dialect_.separator, fields_);
  if (fields_.size() != width_) {
    if (!line_.ended) {
      torn_ = true;
      return false;
    }
    broken_ = error_at(
        line_.number,
        std::to_string(fields_.size()) + " columns, where the first row has " + std::to_string(width_),
        "the rows must be alike");
    return *broken_;
  }
  row.gap = measure::GapCause::samples_lost;
  row.missing = false;
  row.raw.resize(columns_.size());
  if (time_column_) {
    if (auto placed = place(row, fields_[*time_column_], line_.number); !placed) {
      if (!line_.ended) {
        torn_ = true;
        return false;
      }
      broken_ = placed.error();
      return *broken_;
    }
  } else {
    ++index_;
  }
  row.index = index_;
  for (std::size_t c = 0; c < columns_.size(); ++c) {
    if (!parse_number(fields_[columns_[c]], row.raw[c], dialect_.decimal_comma)) row.missing = true;
  }
  return true;
}

}  // namespace

Result<std::unique_ptr<Source>> open_csv(const config::RecordingSettings& settings,
                                         const std::vector<config::ChannelSettings>& channels) {
  auto file = ByteReader::open(settings.path);
  if (!file) return file.error();
  if (file.value().size() == 0) return Error{settings.path, "the file is empty", "name a recording"};
  auto source = std::make_unique<CsvSource>(LineReader(std::move(file).value()), channels);
  if (auto started = source->start(settings); !started) return started.error();
  return std::unique_ptr<Source>(std::move(source));
}

}  // namespace tramline::acquire
