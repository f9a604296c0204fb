#include "daemon/acquire/recording.hpp"

#include <algorithm>
#include <cctype>
#include <cmath>

#include "daemon/acquire/byte_reader.hpp"
#include "daemon/acquire/comtrade.hpp"
#include "daemon/acquire/csv.hpp"
#include "daemon/acquire/wav.hpp"

namespace tramline::acquire {
namespace {

std::string lower_ending(const std::string& path) {
  const std::size_t dot = path.rfind('.');
  std::string ending = dot == std::string::npos ? "" : path.substr(dot + 1);
  std::transform(ending.begin(), ending.end(), ending.begin(),
                 [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
  return ending;
}

config::RecordingFormat format_of(const config::RecordingSettings& settings) {
  if (settings.format != config::RecordingFormat::by_name) return settings.format;
  const std::string ending = lower_ending(settings.path);
  if (ending == "wav" || ending == "wave" || ending == "rf64") return config::RecordingFormat::wav;
  if (ending == "csv" || ending == "txt" || ending == "tsv") return config::RecordingFormat::csv;
  if (ending == "cfg" || ending == "cff" || ending == "dat") return config::RecordingFormat::comtrade;
  return config::RecordingFormat::by_name;
}

}  // namespace

Status check_rate(double rate_hz, const std::string& where) {
  if (rate_hz >= kLowestRateHz && rate_hz <= kHighestRateHz) return kDone;
  return Error{where, "a sample rate of " + std::to_string(rate_hz) + " Hz",
               "360 Hz to 1 MHz can be measured"};
}

Result<std::vector<std::size_t>> columns_for(const std::vector<config::ChannelSettings>& channels,
                                             const std::vector<std::string>& names,
                                             const std::string& where) {
  std::string all;
  for (std::size_t i = 0; i < names.size(); ++i) {
    all += (i == 0 ? "" : ", ") + std::to_string(i + 1) +
           (names[i].empty() ? "" : " (" + displayable(names[i]) + ")");
  }
  std::vector<std::size_t> columns;
  for (std::size_t c = 0; c < channels.size(); ++c) {
    const std::string& wanted = channels[c].source_channel;
    std::int64_t number = static_cast<std::int64_t>(c) + 1;
    if (!wanted.empty()) {
      const auto named = std::find(names.begin(), names.end(), wanted);
      if (named != names.end()) {
        number = named - names.begin() + 1;
      } else if (!parse_integer(wanted, number)) {
        number = 0;
      }
    }
    if (number < 1 || number > static_cast<std::int64_t>(names.size())) {
      return Error{where,
                   "there is no channel " + (wanted.empty() ? std::to_string(number) : "\"" + wanted + "\"") +
                       " in it",
                   "it has " + all};
    }
    columns.push_back(static_cast<std::size_t>(number - 1));
  }
  return columns;
}

Result<std::unique_ptr<Source>> open_recording(const config::RecordingSettings& settings,
                                               const std::vector<config::ChannelSettings>& channels) {
  switch (format_of(settings)) {
    case config::RecordingFormat::wav:
      return open_wav(settings, channels);
    case config::RecordingFormat::csv:
      return open_csv(settings, channels);
    case config::RecordingFormat::comtrade:
      return open_comtrade(settings, channels);
    case config::RecordingFormat::by_name:
      break;
  }
  return Error{settings.path, "what kind of recording is this?",
               "known are .wav, .csv, .txt, .tsv, .cfg and .cff"};
}

}  // namespace tramline::acquire
