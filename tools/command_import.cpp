#include <spdlog/fmt/fmt.h>

#include <chrono>
#include <iostream>
#include <memory>
#include <nlohmann/json.hpp>
#include <string>
#include <string_view>
#include <vector>

#include "config/site_file.hpp"
#include "config/time_text.hpp"
#include "config/version.hpp"
#include "daemon/acquire/open_source.hpp"
#include "daemon/acquire/recording.hpp"
#include "daemon/pipeline.hpp"
#include "storage/logbook_writer.hpp"
#include "tools/commands.hpp"
#include "tools/progress_bar.hpp"
#include "tools/question.hpp"

namespace tramline::tools {
namespace {

struct Request {
  std::string recording;
  std::string site_file;
  std::string into;
  std::string start;
  std::vector<std::string> channels;  // input.L1=COLUMN[*SCALE]
  double nominal_v = 0.0;
  double frequency_hz = 50.0;
  double rate_hz = 0.0;
  std::string time_column;
  bool primary = false;
};

constexpr std::size_t kFramesABlock = 16384;

Error wrong_option(std::string option, std::string what, std::string remedy) {
  return {std::move(option), std::move(what), std::move(remedy)};
}

/// `text` as a YAML string: JSON's quoting is also YAML's.
std::string yaml_string(const std::string& text) {
  return nlohmann::json(text).dump(-1, ' ', false, nlohmann::json::error_handler_t::replace);
}

/// The site file that stands for the options of an import without one.
Result<std::string> site_text(const Request& request) {
  if (!(request.nominal_v > 0.0)) {
    return wrong_option(
        "import", "without --site the nominal voltage is not known",
        "give --nominal-v, in the recording's own volts (a secondary voltage or 1 for per unit), or --site");
  }
  std::string channels;
  bool three_phase = false;
  const std::vector<std::string> given =
      request.channels.empty() ? std::vector<std::string>{"input.L1"} : request.channels;
  for (const std::string& text : given) {
    const std::size_t dot = text.find('.');
    const std::size_t equals = std::min(text.find('='), text.size());
    if (dot == std::string::npos || dot > equals) {
      return wrong_option("--channel " + text, "this names no channel",
                          "write input.L1=COLUMN or output.L2=NAME*SCALE");
    }
    const std::string phase = text.substr(dot + 1, equals - dot - 1);
    std::string column = equals < text.size() ? text.substr(equals + 1) : "";
    std::string scale;
    if (const std::size_t star = column.rfind('*'); star != std::string::npos) {
      scale = column.substr(star + 1);
      column.resize(star);
    }
    three_phase = three_phase || phase != "L1";
    channels +=
        fmt::format("  - {{side: {}, phase: {}", yaml_string(text.substr(0, dot)), yaml_string(phase));
    if (!column.empty()) channels += ", source_channel: " + yaml_string(column);
    if (!scale.empty()) channels += ", scale: " + scale;
    channels += "}\n";
  }
  const std::string name = request.recording.substr(request.recording.rfind('/') + 1);
  return fmt::format(
      "# Made from the options of an import.\nsite:\n  name: {}\n  zone: UTC\n  nominal_v: {}\n  "
      "frequency_hz: {}\n  phases: {}\n"
      "channels:\n{}logbook:\n  path: {}\nsource:\n  kind: recording\n  path: {}\n",
      yaml_string("recording " + name), request.nominal_v, request.frequency_hz, three_phase ? 3 : 1,
      channels, yaml_string(request.into), yaml_string(request.recording));
}

/// The site to measure by, with the options put into it. Prints the faults of a site file itself.
Result<config::Site> site_of(const Request& request) {
  config::SiteFile file;
  if (request.site_file.empty()) {
    const auto text = site_text(request);
    if (!text) return text.error();
    file = config::parse_site(text.value(), "options");
  } else {
    file = config::read_site_file(request.site_file);
  }
  if (!file.ok()) return Error{"", file.fault_text(), ""};
  config::Site site = std::move(*file.site);

  if (!request.recording.empty() && !request.site_file.empty()) {
    config::RecordingSettings settings;
    if (const auto* own = std::get_if<config::RecordingSettings>(&site.source)) settings = *own;
    settings.path = request.recording;
    site.source = settings;
  }
  if (auto* simulator = std::get_if<config::SimulatorSettings>(&site.source)) {
    simulator->real_time = false;
    if (!(simulator->run_for_s > 0.0)) {
      return Error{request.site_file,
                   "the simulator is to run until stopped, so an import of it would never end",
                   "give source.run_for, or a recording to import"};
    }
  }
  std::optional<UtcNs> start;
  if (!request.start.empty()) {
    const auto time = config::parse_time(request.start, site.zone);
    if (!time) return wrong_option("--start " + time.error().where, time.error().what, time.error().remedy);
    start = time.value();
  }
  if (auto* recording = std::get_if<config::RecordingSettings>(&site.source)) {
    if (start) recording->begin = start;
    if (request.rate_hz > 0.0) recording->rate_hz = request.rate_hz;
    if (!request.time_column.empty()) recording->time_column = request.time_column;
    recording->primary = recording->primary || request.primary;
  } else if (auto* simulator = std::get_if<config::SimulatorSettings>(&site.source)) {
    if (start) simulator->begin = start;
  } else {
    return Error{request.site_file, "its source samples as time goes, which an import cannot wait for",
                 "name a RECORDING, or let tramlined measure"};
  }
  if (!request.into.empty()) site.logbook.path = request.into;
  return site;
}

UtcNs now() {
  return {std::chrono::duration_cast<std::chrono::nanoseconds>(
              std::chrono::system_clock::now().time_since_epoch())
              .count()};
}

struct Imported {
  std::int64_t frames = 0;
  std::string end;
};

Result<Imported> run(const config::Site& site, acquire::Source& source, storage::LogbookWriter& logbook) {
  const acquire::StreamInfo& info = source.info();
  std::vector<storage::Record> records;
  records.emplace_back(storage::SessionBegin{std::string("tramline ") + kVersion, info.what, info.rate_hz,
                                             info.dated, info.begin});
  records.emplace_back(storage::SettingsInForce{info.begin, site.text});
  records.emplace_back(storage::CalibrationInForce{info.begin, site.calibration.text});
  Pipeline pipeline(site, info, "import began");
  measure::Block block;
  Imported imported;
  std::optional<Error> broken;
  ProgressBar bar("importing");
  for (;;) {
    const auto more = source.next(block, kFramesABlock);
    if (!more) broken = more.error();
    if (!more || !more.value()) break;
    imported.frames += static_cast<std::int64_t>(block.frames());
    pipeline.take(block, records);
    if (auto written = logbook.write(records); !written) return written.error();
    bar.show(source.progress());
  }
  imported.end = broken ? "the recording could not be read on: " + broken->what : source.end_remark();
  pipeline.finish(storage::EventEnd::stopped, imported.end, records);
  records.emplace_back(storage::SessionEnd{imported.end});
  if (auto written = logbook.write(records); !written) return written.error();
  if (auto flushed = logbook.flush(); !flushed) return flushed.error();
  if (broken) return *broken;
  return imported;
}

ExitStatus import(const Request& request) {
  const auto site = site_of(request);
  if (!site) return tell(site.error(), ExitStatus::wrong_usage);
  if (site.value().logbook.path.empty()) {
    return tell({"import", "no logbook is named", "give --into LOGBOOK"}, ExitStatus::wrong_usage);
  }
  auto source = acquire::open_source(site.value(), now());
  if (!source) return tell(source.error(), ExitStatus::wrong_usage);
  storage::OpenOptions options;
  options.in_large_batches = true;
  auto logbook = storage::LogbookWriter::open(site.value().logbook.path, options);
  if (!logbook) return tell(logbook.error(), ExitStatus::could_not);

  const auto imported = run(site.value(), *source.value(), logbook.value());
  if (!imported) return tell(imported.error(), ExitStatus::could_not);
  const acquire::StreamInfo& info = source.value()->info();
  std::cout << info.what << '\n';
  for (const std::string& remark : info.remarks)
    std::cout << "Note: " << remark << '\n';
  if (!info.dated)
    std::cout << "Note: the recording has no time of its own and none was given with --start: it is marked "
                 "undated.\n";
  const double seconds = static_cast<double>(imported.value().frames) / info.rate_hz;
  std::cout << fmt::format("Measured {} samples a channel ({}); ended: {}.\n", imported.value().frames,
                           config::format_duration(static_cast<std::int64_t>(seconds * 1e9)),
                           imported.value().end);
  std::cout << "Logbook: " << site.value().logbook.path << '\n';
  return ExitStatus::answered;
}

}  // namespace

void add_import(CLI::App& app, ExitStatus& status) {
  CLI::App* command = app.add_subcommand("import", "Measure a recording, or a simulation, into a logbook.");
  auto request = std::make_shared<Request>();
  command->add_option("RECORDING", request->recording,
                      "WAV, CSV or COMTRADE (.cfg, .cff); absent: the site's own source");
  command->add_option("--site", request->site_file,
                      "the site file: nominal voltage, channels, regulator, thresholds");
  command->add_option("--into", request->into, "the logbook to write; absent: the site's");
  command->add_option("--start", request->start, "time of the first sample, over the recording's own");
  command->add_option(
      "--channel", request->channels,
      "without --site: input.L1=COLUMN[*SCALE]; COLUMN is a number from 1 or a name; may be repeated");
  command->add_option("--nominal-v", request->nominal_v,
                      "without --site: nominal voltage in the recording's own volts");
  command->add_option("--frequency-hz", request->frequency_hz, "without --site: 50 or 60")
      ->capture_default_str();
  command->add_option("--rate-hz", request->rate_hz, "CSV without a time column: samples a second");
  command->add_option("--time-column", request->time_column, "CSV: the column that holds the time");
  command->add_flag("--primary", request->primary, "COMTRADE: take primary values, not secondary");
  command->callback([request, &status] { status = import(*request); });
}

}  // namespace tramline::tools
