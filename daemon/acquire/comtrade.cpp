#include "daemon/acquire/comtrade.hpp"

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstring>
#include <filesystem>
#include <limits>
#include <utility>

#include "daemon/acquire/recording.hpp"
#include "daemon/acquire/row_source.hpp"

namespace tramline::acquire {
namespace {

namespace fs = std::filesystem;
using Data = ComtradeConfig::Data;

constexpr double kSameRate = 0.05;  // sections whose rates differ by less are one stream
constexpr std::uint32_t kNoStamp = 0xffffffff;
constexpr std::int64_t kLatestStamp = 1'000'000'000'000'000'000;
constexpr std::int64_t kHighestNumber = 1'000'000'000'000;
constexpr std::size_t kFewUneven = 4;
constexpr std::int64_t kAnchorEvery = 20000;  // rows, where the time stamps rule

std::uint32_t u32(const std::uint8_t* b) {
  return static_cast<std::uint32_t>(b[0]) | static_cast<std::uint32_t>(b[1]) << 8U |
         static_cast<std::uint32_t>(b[2]) << 16U | static_cast<std::uint32_t>(b[3]) << 24U;
}

/// Volts for one of a unit; nothing if it is no voltage.
std::optional<double> volts_of(std::string_view unit) {
  std::string lower(trimmed(unit));
  std::transform(lower.begin(), lower.end(), lower.begin(),
                 [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
  if (lower == "v") return 1.0;
  if (lower == "kv") return 1e3;
  if (lower == "mv") return 1e-3;
  return std::nullopt;
}

/// One row of the data file as numbers: number, stamp, raw analog values. NaN: missing.
struct DataRow {
  std::int64_t number = 0;
  std::optional<std::int64_t> stamp;
  std::vector<double> analog;
};

/// The rows of the data file, whatever its kind.
class DataReader {
 public:
  DataReader(LineReader lines, const ComtradeConfig& config) : lines_(std::move(lines)), config_(config) {
    const std::size_t width = config.data == Data::binary16 ? 2 : 4;
    record_.resize(8 + width * config.analog.size() + 2 * ((config.status_channels + 15) / 16));
  }
  /// false at the end; then `torn()` says whether a row was cut short.
  Result<bool> next(DataRow& row) { return config_.data == Data::ascii ? next_text(row) : next_binary(row); }
  [[nodiscard]] bool torn() const { return torn_; }
  [[nodiscard]] double progress() const { return lines_.progress(); }

 private:
  Result<bool> next_text(DataRow& row);
  Result<bool> next_binary(DataRow& row);

  LineReader lines_;
  const ComtradeConfig& config_;
  std::vector<std::string_view> fields_;
  std::vector<std::uint8_t> record_;
  std::int64_t records_ = 0;
  bool torn_ = false;
};

Result<bool> DataReader::next_text(DataRow& row) {
  std::string_view line;
  const auto more = lines_.next(line);
  if (!more || !more.value()) return more;
  split(line, ',', fields_);
  const std::size_t promised = 2 + config_.analog.size() + config_.status_channels;
  if (fields_.size() != promised) {
    if (!lines_.last_was_ended()) {
      torn_ = true;
      return false;
    }
    return Error{lines_.where(),
                 std::to_string(fields_.size()) + " fields, where the configuration promises " +
                     std::to_string(promised),
                 "data and configuration do not belong together, or the file is damaged"};
  }
  if (!parse_integer(fields_[0], row.number))
    return Error{lines_.where(), "the sample number cannot be read", "the file is damaged"};
  std::int64_t stamp = 0;
  row.stamp = parse_integer(fields_[1], stamp) && stamp >= 0 && stamp <= kLatestStamp ? std::optional(stamp)
                                                                                      : std::nullopt;
  row.analog.resize(config_.analog.size());
  for (std::size_t i = 0; i < row.analog.size(); ++i) {
    double& value = row.analog[i];
    // A missing value is an empty field (2013) or 99999 (1999, and later files too where no raw value may be
    // so large); from memory.
    const bool may_be_99999 = config_.revision >= 2013 && config_.analog[i].raw_max >= 99999.0;
    if (!parse_number(fields_[2 + i], value) || (value == 99999.0 && !may_be_99999)) value = std::nan("");
  }
  return true;
}

Result<bool> DataReader::next_binary(DataRow& row) {
  const auto got = lines_.read(record_);
  if (!got) return got.error();
  torn_ = torn_ || (got.value() > 0 && got.value() < record_.size());
  if (got.value() < record_.size()) return false;
  ++records_;
  row.number = u32(record_.data());
  const std::uint32_t stamp = u32(record_.data() + 4);
  row.stamp = stamp == kNoStamp ? std::nullopt : std::optional<std::int64_t>(stamp);
  row.analog.resize(config_.analog.size());
  const std::uint8_t* at = record_.data() + 8;
  for (double& value : row.analog) {
    if (config_.data == Data::binary16) {
      const auto raw = static_cast<std::int16_t>(static_cast<std::uint16_t>(at[0] | at[1] << 8U));
      value = raw == std::numeric_limits<std::int16_t>::min() ? std::nan("") : raw;
      at += 2;
    } else if (config_.data == Data::binary32) {
      const auto raw = std::bit_cast<std::int32_t>(u32(at));
      value = raw == std::numeric_limits<std::int32_t>::min() ? std::nan("") : raw;
      at += 4;
    } else {
      const auto raw = std::bit_cast<float>(u32(at));
      value = raw <= std::numeric_limits<float>::lowest() ? std::nan("") : static_cast<double>(raw);
      at += 4;
    }
  }
  return true;
}

class ComtradeSource : public RowSource {
 public:
  ComtradeSource(std::string path, ComtradeConfig config, LineReader data,
                 const std::vector<config::ChannelSettings>& channels)
      : RowSource(channels),
        path_(std::move(path)),
        config_(std::move(config)),
        data_(std::move(data), config_) {}

  Status start(const config::RecordingSettings& settings);

  [[nodiscard]] std::string end_remark() const override {
    std::string remark = "end of file";
    if (last_number_ < config_.samples) {
      remark = "the data ends early: " + std::to_string(last_number_) + " of " +
               std::to_string(config_.samples) + " samples are there";
    } else if (last_number_ > config_.samples) {
      remark += "; " + std::to_string(last_number_ - config_.samples) +
                " samples more than its configuration promises are there";
    }
    if (data_.torn()) remark += ", the last one is cut short";
    if (missing_rows() - left_out_ > 0)
      remark += "; " + std::to_string(missing_rows() - left_out_) + " samples were marked missing";
    return remark;
  }
  [[nodiscard]] double progress() const override { return data_.progress(); }

 protected:
  Result<bool> read_row(Row& row) override;

 private:
  Status lay_out_sections();
  Status look_at_stamps();
  Result<bool> next_data_row(DataRow& row);
  void place_by_section(Row& row, std::int64_t number);
  Status place_by_stamp(Row& row);

  /// A sampling section on the stream's own count of frames.
  struct Placed {
    std::int64_t first_number;  // of its first row
    std::int64_t last_number;
    std::int64_t first_index;
    double rate_hz;
    std::int64_t begin_ns;  // since the first sample
    bool used;              // its rate is near enough to the stream's
  };

  std::string path_;
  ComtradeConfig config_;
  DataReader data_;
  std::vector<std::size_t> columns_;
  struct Conversion {
    double a, b, volts;
  };
  std::vector<Conversion> conversions_;
  std::vector<Placed> sections_;
  std::size_t section_ = 0;
  std::vector<DataRow> ahead_;
  std::size_t ahead_used_ = 0;
  DataRow data_row_;
  std::int64_t last_number_ = 0;
  std::int64_t last_index_ = -1;
  std::int64_t number_base_ = 0;  // added to the file's own numbers: 1 where it counts from 0
  std::int64_t first_stamp_ = 0;
  std::int64_t last_stamp_ = 0;
  std::int64_t anchored_at_ = 0;
  double stamp_ns_ = 1000.0;
  std::int64_t left_out_ = 0;
  std::optional<std::size_t> anchored_section_;
  std::optional<Error> broken_;
};

Status ComtradeSource::start(const config::RecordingSettings& settings) {
  std::vector<std::string> names;
  for (const auto& analog : config_.analog)
    names.push_back(analog.name);
  const auto columns = columns_for(channels_, names, path_);
  if (!columns) return columns.error();
  columns_ = columns.value();
  for (const std::size_t column : columns_) {
    const ComtradeConfig::Analog& analog = config_.analog[column];
    const auto unit = volts_of(analog.unit);
    if (!unit)
      info_.remarks.push_back("channel " + analog.name + " is in \"" + analog.unit + "\", taken as volts");
    double volts = unit.value_or(1.0);
    if (settings.primary != analog.is_primary && analog.primary > 0.0 && analog.secondary > 0.0) {
      volts *= settings.primary ? analog.primary / analog.secondary : analog.secondary / analog.primary;
    }
    conversions_.push_back({analog.a, analog.b, volts});
  }
  stamp_ns_ = (config_.nanosecond_stamps ? 1.0 : 1000.0) * config_.stamp_multiplier;
  if (config_.sections.empty()) {
    if (auto seen = look_at_stamps(); !seen) return seen;
  } else if (auto laid = lay_out_sections(); !laid) {
    return laid;
  }
  if (auto sound = check_rate(info_.rate_hz, path_); !sound) return sound;

  if (config_.revision != 1991 && config_.stated_revision != "1999" && config_.stated_revision != "2013") {
    info_.remarks.push_back("the file states revision " + displayable(config_.stated_revision) +
                            ", which no edition defines; read as " + std::to_string(config_.revision));
  }
  if (settings.begin) {
    info_.begin = *settings.begin;
  } else if (config_.begin) {
    info_.begin = *config_.begin;
    if (!config_.zone_known)
      info_.remarks.emplace_back("the recorder's time zone is not stated; its time is taken as UTC");
  } else {
    info_.dated = false;
    info_.remarks.emplace_back("the time of the first sample cannot be read");
  }
  char rate[32];
  std::snprintf(rate, sizeof rate, "%.6g", info_.rate_hz);
  info_.what = "COMTRADE recording " + path_ + (config_.station.empty() ? "" : " of " + config_.station) +
               ", " + std::to_string(config_.analog.size()) + " analog channels, " + rate +
               " samples a second" + (settings.primary ? ", primary values" : ", secondary values");
  return kDone;
}

Status ComtradeSource::lay_out_sections() {
  // The stream's rate is that of the longest stretch of time sampled at one rate.
  double longest_s = 0.0;
  std::int64_t first = 1;
  for (const auto& section : config_.sections) {
    const double seconds = static_cast<double>(section.last - first + 1) / section.rate_hz;
    if (seconds > longest_s) {
      longest_s = seconds;
      info_.rate_hz = section.rate_hz;
    }
    first = section.last + 1;
  }
  if (auto sound = check_rate(info_.rate_hz, path_); !sound) return sound;
  first = 1;
  double index = 0.0;
  double begin_s = 0.0;
  double left_out_s = 0.0;
  std::size_t left_out = 0;
  for (const auto& section : config_.sections) {
    const auto rows = static_cast<double>(section.last - first + 1);
    const bool used = std::abs(section.rate_hz / info_.rate_hz - 1.0) <= kSameRate;
    sections_.push_back(
        {first, section.last, std::llround(index), section.rate_hz, std::llround(begin_s * 1e9), used});
    index = used ? static_cast<double>(std::llround(index)) + rows
                 : index + rows / section.rate_hz * info_.rate_hz;
    begin_s += rows / section.rate_hz;
    if (begin_s > kLongestRecordingSeconds)
      return Error{path_, "the sampling sections span more than twenty years",
                   "the configuration is damaged"};
    if (!used) {
      ++left_out;
      left_out_s += rows / section.rate_hz;
    }
    first = section.last + 1;
  }
  info_.frames = std::llround(index);
  if (left_out > 0) {
    char text[160];
    std::snprintf(text, sizeof text,
                  "%zu of %zu sampling sections (%.3f s) have another sample rate and are left out as a gap",
                  left_out, sections_.size(), left_out_s);
    info_.remarks.emplace_back(text);
  }
  return kDone;
}

Status ComtradeSource::look_at_stamps() {
  std::vector<std::int64_t> steps;
  for (std::size_t i = 0; i < 500; ++i) {
    DataRow row;
    const auto more = data_.next(row);
    if (!more) return more.error();
    if (!more.value()) break;
    if (!row.stamp)
      return Error{path_, "no sample rate is given and the samples bear no time stamps",
                   "the recording cannot be placed in time"};
    if (!ahead_.empty()) steps.push_back(*row.stamp - *ahead_.back().stamp);
    ahead_.push_back(std::move(row));
  }
  if (steps.empty())
    return Error{path_, "no sample rate is given and there are too few samples to see it",
                 "the recording is empty or cut short"};
  std::nth_element(steps.begin(), steps.begin() + static_cast<std::ptrdiff_t>(steps.size() / 2), steps.end());
  const std::int64_t usual = steps[steps.size() / 2];
  if (usual <= 0) return Error{path_, "the time stamps do not advance", "the file is damaged"};
  // Stamps are rounded to a whole microsecond; over many rows that averages out, with the gaps left out.
  double sum = 0.0;
  std::size_t count = 0;
  std::size_t uneven = 0;
  for (const std::int64_t step : steps) {
    if (step > usual / 2 && 2 * step < 3 * usual) {
      sum += static_cast<double>(step);
      ++count;
    } else if (step > 0 && 2 * step < 5 * usual) {
      ++uneven;
    }
  }
  if (uneven > kFewUneven + steps.size() / 10)
    return Error{path_, "the time stamps step unevenly, so that lost samples cannot be told from rounding",
                 "a configuration with a sample rate can be read"};
  info_.rate_hz = static_cast<double>(count) / sum * 1e9 / stamp_ns_;
  first_stamp_ = *ahead_.front().stamp;
  return kDone;
}

Result<bool> ComtradeSource::next_data_row(DataRow& row) {
  if (ahead_used_ < ahead_.size()) {
    row = std::move(ahead_[ahead_used_++]);
    return true;
  }
  return data_.next(row);
}

Result<bool> ComtradeSource::read_row(Row& row) {
  if (broken_) return *broken_;
  const auto more = next_data_row(data_row_);
  if (!more) broken_ = more.error();
  if (!more || !more.value()) return more;
  if (last_number_ == 0 && data_row_.number == 0) number_base_ = 1;
  data_row_.number += number_base_;
  if (data_row_.number <= last_number_ || data_row_.number > kHighestNumber) {
    broken_ =
        Error{path_ + ", sample " + std::to_string(data_row_.number),
              "the sample numbers do not rise (the one before was " + std::to_string(last_number_) + ")",
              "data and configuration do not belong together, or the file is damaged"};
    return *broken_;
  }
  last_number_ = data_row_.number;
  row.gap = measure::GapCause::samples_lost;
  row.missing = false;
  row.raw.resize(columns_.size());
  row.at_limit.assign(columns_.size(), false);
  for (std::size_t c = 0; c < columns_.size(); ++c) {
    const double raw = data_row_.analog[columns_[c]];
    if (std::isnan(raw)) row.missing = true;
    row.raw[c] = (conversions_[c].a * raw + conversions_[c].b) * conversions_[c].volts;
    row.at_limit[c] = config_.data == Data::binary16 && std::abs(raw) >= 32767.0;
  }
  if (config_.sections.empty()) {
    if (auto placed = place_by_stamp(row); !placed) {
      broken_ = placed.error();
      return *broken_;
    }
  } else {
    place_by_section(row, data_row_.number);
  }
  return true;
}

void ComtradeSource::place_by_section(Row& row, std::int64_t number) {
  while (section_ + 1 < sections_.size() && number > sections_[section_].last_number)
    ++section_;
  const Placed& section = sections_[section_];
  row.index = section.first_index + (number - section.first_number);
  if (!section.used) {
    row.missing = true;
    row.gap = measure::GapCause::rate_change;
    ++left_out_;
    return;
  }
  if (section_ > 0 && anchored_section_ != section_) {
    anchored_section_ = section_;
    row.anchor = measure::ClockAnchor{{section.first_index}, info_.begin + section.begin_ns, section.rate_hz};
  }
}

Status ComtradeSource::place_by_stamp(Row& row) {
  const auto fault = [this](const char* what) {
    return Error{path_ + ", sample " + std::to_string(data_row_.number), what,
                 "without a sample rate every sample needs its time"};
  };
  if (!data_row_.stamp) return fault("it bears no time stamp");
  const double since_s = static_cast<double>(*data_row_.stamp - first_stamp_) * stamp_ns_ / 1e9;
  if (since_s > kLongestRecordingSeconds) return fault("the time stamp jumps by more than can be");
  std::int64_t advance = 1;
  if (last_index_ >= 0) {
    const double intervals =
        static_cast<double>(*data_row_.stamp - last_stamp_) * stamp_ns_ / 1e9 * info_.rate_hz;
    if (!(intervals > 0.0)) return fault("the time stamp does not advance");
    if (intervals > 1.5) {
      advance = std::max<std::int64_t>(2, std::llround(intervals));
      row.gap = measure::GapCause::time_jump;
    }
  }
  last_index_ = last_index_ < 0 ? 0 : last_index_ + advance;
  last_stamp_ = *data_row_.stamp;
  row.index = last_index_;
  if (advance > 1 || last_index_ - anchored_at_ >= kAnchorEvery) {
    anchored_at_ = last_index_;
    row.anchor =
        measure::ClockAnchor{{last_index_}, info_.begin + std::llround(since_s * 1e9), info_.rate_hz};
  }
  return kDone;
}

/// The file beside `path` with this ending, whatever its letters' case.
std::optional<std::string> sibling(const std::string& path, std::string_view ending) {
  const fs::path wanted = fs::path(path).replace_extension(ending);
  std::error_code code;
  if (fs::exists(wanted, code)) return wanted.string();
  const auto lower = [](std::string text) {
    std::transform(text.begin(), text.end(), text.begin(),
                   [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
    return text;
  };
  const fs::path folder = wanted.has_parent_path() ? wanted.parent_path() : fs::path(".");
  for (fs::directory_iterator entry(folder, code), end; !code && entry != end; entry.increment(code)) {
    if (lower(entry->path().filename().string()) == lower(wanted.filename().string()))
      return entry->path().string();
  }
  return std::nullopt;
}

bool ends_with_cff(const std::string& path) {
  const std::string ending = fs::path(path).extension().string();
  return ending == ".cff" || ending == ".CFF";
}

/// Reads a .cff up to the line that opens the section `name`.
Status find_section(LineReader& lines, std::string_view name) {
  std::string_view line;
  for (;;) {
    const auto more = lines.next(line);
    if (!more) return more.error();
    if (!more.value())
      return Error{lines.where(), "the combined file has no " + std::string(name) + " section",
                   "the file is damaged"};
    if (line.starts_with("---") && line.find(name) != std::string_view::npos) return kDone;
  }
}

}  // namespace

Result<std::unique_ptr<Source>> open_comtrade(const config::RecordingSettings& settings,
                                              const std::vector<config::ChannelSettings>& channels) {
  const bool combined = ends_with_cff(settings.path);
  std::string path = settings.path;
  if (!combined) {
    const auto beside = sibling(path, ".cfg");
    if (!beside)
      return Error{path, "there is no configuration (.cfg) beside it",
                   "a COMTRADE recording is a pair of .cfg and .dat"};
    path = *beside;
  }
  auto file = ByteReader::open(path);
  if (!file) return file.error();
  if (file.value().size() == 0) return Error{path, "the file is empty", "name a recording"};
  LineReader lines(std::move(file).value());
  if (combined) {
    if (auto found = find_section(lines, "file type: CFG"); !found) return found.error();
  }
  auto config = read_comtrade_config(lines);
  if (!config) return config.error();

  std::optional<LineReader> data;
  if (combined) {
    if (auto found = find_section(lines, "file type: DAT"); !found) return found.error();
    data.emplace(std::move(lines));
  } else {
    const auto beside = sibling(path, ".dat");
    if (!beside)
      return Error{path, "there is no data file (.dat) beside it",
                   "a COMTRADE recording is a pair of .cfg and .dat"};
    auto opened = ByteReader::open(*beside);
    if (!opened) return opened.error();
    if (opened.value().size() == 0) return Error{*beside, "the data file is empty", "name a recording"};
    data.emplace(std::move(opened).value());
  }
  auto source = std::make_unique<ComtradeSource>(path, std::move(config).value(), std::move(*data), channels);
  if (auto started = source->start(settings); !started) return started.error();
  return std::unique_ptr<Source>(std::move(source));
}

}  // namespace tramline::acquire
