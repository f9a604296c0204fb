#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <charconv>
#include <chrono>
#include <cmath>
#include <iostream>
#include <memory>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include "config/calibration_file.hpp"
#include "config/site_file.hpp"
#include "config/time_text.hpp"
#include "storage/logbook_reader.hpp"
#include "tools/calibration_figures.hpp"
#include "tools/calibration_report.hpp"
#include "tools/calibration_show.hpp"
#include "tools/commands.hpp"
#include "tools/logged_reading.hpp"
#include "tools/paragraph.hpp"
#include "tools/question.hpp"
#include "tools/replace_file.hpp"

namespace tramline::tools {
namespace {

using config::CalibrationReading;
using config::ChannelCalibration;
using nlohmann::ordered_json;

struct Request {
  std::string site_file;
  std::string channel;
  std::string logbook;
  std::vector<std::string> readings;     // LOGGER=REFERENCE
  std::vector<std::string> dc_readings;  // LOGGER=REFERENCE
  std::vector<std::string> at;           // TIME=REFERENCE
  std::string reference_uncertainty;     // 0.5% or 1.2V
  double reference_k = 2.0;
  std::string reference;
  std::string reference_date;
  std::optional<double> resolution_v;
  std::optional<double> reference_resolution_v;
  std::optional<double> temperature_c;
  std::optional<double> temperature_coefficient_ppm_per_k;
  std::optional<double> temperature_span_k;
  std::string due;
  std::string valid_for;
  std::string note;
  bool dry_run = false;
  bool show = false;
  bool json = false;
};

constexpr const char* kCautions[] = {
    "Mains voltage kills. Only a competent and, where the law asks for it, licensed person connects a meter "
    "to it, "
    "by local codes and the makers' instructions; this page replaces neither.",
    "The reference meter, its leads and its probes must be rated for the place: the measurement category "
    "(IEC 61010; "
    "CAT II at socket outlets, CAT III in fixed wiring, CAT IV at the service entrance) and the voltage, "
    "fuses "
    "included.",
    "Isolate, lock off and prove dead, with a tester proved before and after, before any lead is fixed or "
    "moved. A "
    "sensor's input is shorted for a d.c. reading on a dead circuit, disconnected from the mains.",
};

constexpr const char* kHow =
    "Connect the reference where the sensor is connected. At a steady voltage read both at the same time, "
    "and give "
    "--channel, --reading LOGGER=REFERENCE (or --at TIME=REFERENCE, with the logger's value from its "
    "logbook), "
    "several times and if you can at several voltages; --reference-uncertainty from the certificate; and "
    "--reference, "
    "what the reference is. See tramline(1).";

std::string cautions() {
  std::string text;
  for (const char* caution : kCautions)
    text += indented(caution, 0);
  return text + "\n";
}

UtcNs now() {
  return {std::chrono::duration_cast<std::chrono::nanoseconds>(
              std::chrono::system_clock::now().time_since_epoch())
              .count()};
}

Error wrong(std::string option, std::string what, std::string remedy) {
  return {std::move(option), std::move(what), std::move(remedy)};
}

std::optional<double> number_of(std::string_view text) {
  if (text.size() > 1 && text.front() == '+' && text[1] != '-') text.remove_prefix(1);
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc{} || end != text.data() + text.size() || !std::isfinite(value)) return std::nullopt;
  return value;
}

std::optional<double> volts_of(std::string_view text) {
  if (!text.empty() && (text.back() == 'V' || text.back() == 'v')) text.remove_suffix(1);
  while (!text.empty() && text.back() == ' ')
    text.remove_suffix(1);
  return number_of(text);
}

/// What stands before and after the last =.
std::pair<std::string, std::string> halves(const std::string& text) {
  const std::size_t equals = text.rfind('=');
  if (equals == std::string::npos) return {text, ""};
  return {text.substr(0, equals), text.substr(equals + 1)};
}

// ---- what was asked ----------------------------------------------------------------------------------

/// "input L1", "input.L1", or "input" at a site of one phase.
Result<Channel> channel_of(const std::string& text, const config::Site& site) {
  std::string words = text;
  std::replace(words.begin(), words.end(), '.', ' ');
  std::string known;
  for (const config::ChannelSettings& settings : site.channels) {
    const std::string name = config::name_of(settings.channel);
    known += (known.empty() ? "" : ", ") + name;
    if (words == name || (site.phases == 1 && words == tramline::name_of(settings.channel.side)))
      return settings.channel;
  }
  return wrong("--channel \"" + text + "\"",
               text.empty() ? "no channel is named" : "the site has no such channel",
               "its channels are: " + known);
}

Result<UtcNs> time_of(const std::string& text, const config::Site& site, const std::string& option) {
  const auto time = config::parse_time(text, site.zone);
  if (!time) return wrong(option + " " + time.error().where, time.error().what, time.error().remedy);
  return time.value();
}

Status take_reference(const Request& request, const config::Site& site, UtcNs today, Comparison& comparison,
                      ChannelCalibration& entry) {
  std::string_view text = request.reference_uncertainty;
  const bool percent = !text.empty() && text.back() == '%';
  const auto value = percent ? number_of(text.substr(0, text.size() - 1)) : volts_of(text);
  const double highest = percent ? 20.0 : 0.2 * site.nominal_v;
  if (!value || !(*value > 0.0) || *value > highest) {
    return wrong(
        "--reference-uncertainty " + request.reference_uncertainty,
        text.empty() ? "the reference's uncertainty is not given" : "this is no uncertainty of a reference",
        "give its expanded uncertainty from the certificate, 0.5% of the reading or 1.2V, up to 20 %; a "
        "calibration without it says nothing");
  }
  (percent ? comparison.reference_expanded_pct : comparison.reference_expanded_v) = *value;
  if (!(request.reference_k >= 1.0) || request.reference_k > 5.0)
    return wrong("--reference-k", "this is no coverage factor",
                 "it lies between 1 and 5; certificates mostly say 2");
  comparison.reference_k = request.reference_k;
  if (request.reference.empty())
    return wrong("--reference", "the reference is not named",
                 "say what it is and which certificate it has, so that others can follow");
  entry.reference = request.reference;
  entry.reference_expanded_pct = comparison.reference_expanded_pct;
  entry.reference_expanded_v = comparison.reference_expanded_v;
  entry.reference_k = request.reference_k;
  if (!request.reference_date.empty()) {
    const auto date = time_of(request.reference_date, site, "--reference-date");
    if (!date) return date.error();
    if (date.value() > today)
      return wrong("--reference-date " + request.reference_date, "this date is in the future",
                   "give the date of the reference's own certificate");
    entry.reference_date = date.value();
  }
  return kDone;
}

Status take_conditions(const Request& request, Comparison& comparison, ChannelCalibration& entry) {
  const auto within = [](const std::optional<double>& x, double low, double high) {
    return !x || (*x >= low && *x <= high);
  };
  const double step = 0.05 * comparison.nominal_v;
  if (!within(request.resolution_v, 0.0, step) || !within(request.reference_resolution_v, 0.0, step))
    return wrong("--resolution, --reference-resolution", "this is no step of a display",
                 "give volts, from 0 to 5 % of the nominal voltage");
  if (!within(request.temperature_c, -60.0, 100.0))
    return wrong("--temperature", "this is no temperature of a sensor", "give °C, from -60 to 100");
  if (!within(request.temperature_coefficient_ppm_per_k, 0.0, 10'000.0) ||
      !within(request.temperature_span_k, 0.0, 100.0))
    return wrong("--temperature-coefficient, --temperature-span", "this is out of all proportion",
                 "give ppm/K, from 0 to 10000, and K, from 0 to 100");
  if (request.temperature_coefficient_ppm_per_k.has_value() != request.temperature_span_k.has_value())
    return wrong("--temperature-coefficient, --temperature-span", "one is given without the other",
                 "give both: together they say what temperature does to the sensor");
  comparison.resolution_v = request.resolution_v;
  comparison.reference_resolution_v = request.reference_resolution_v;
  comparison.temperature_coefficient_ppm_per_k = request.temperature_coefficient_ppm_per_k;
  comparison.temperature_span_k = request.temperature_span_k;
  entry.temperature_c = request.temperature_c;
  entry.temperature_coefficient_ppm_per_k = request.temperature_coefficient_ppm_per_k;
  entry.temperature_span_k = request.temperature_span_k;
  entry.note = request.note;
  return kDone;
}

Status take_due(const Request& request, const config::Site& site, ChannelCalibration& entry) {
  if (!request.due.empty() && !request.valid_for.empty())
    return wrong("--due, --valid-for", "both are given", "give one of them");
  if (!request.due.empty()) {
    const auto due = time_of(request.due, site, "--due");
    if (!due) return due.error();
    if (due.value() <= entry.date)
      return wrong("--due " + request.due, "this is not after the calibration", "give a later date");
    entry.due = due.value();
  }
  if (!request.valid_for.empty()) {
    const auto lasting = config::parse_duration(request.valid_for);
    if (!lasting || lasting.value() <= 0)
      return wrong("--valid-for " + request.valid_for, "this is no duration", "write it such as 365d");
    entry.due = entry.date + lasting.value();
  }
  return kDone;
}

/// Readings typed in were shown with the calibration that the logger had; that must be the one in the file.
Status check_logger_has_it(const std::string& logbook, const config::ChannelSettings& in_file) {
  if (logbook.empty()) return kDone;
  const auto reader = storage::LogbookReader::open(logbook);
  if (!reader) return kDone;  // nothing was logged yet, or not here
  const auto in_logger = channel_in_force(reader.value(), in_file.channel, std::nullopt);
  if (!in_logger || !in_logger.value()) return kDone;
  if (in_logger.value()->scale == in_file.scale && in_logger.value()->offset == in_file.offset) return kDone;
  return wrong(
      "calibrate",
      "what the logger shows does not yet follow the site file and its calibration: the last session in " +
          logbook + " was begun before they were changed",
      "tell tramlined to read the site file again (HUP) and take the readings anew, or give --at");
}

Status take_readings(const Request& request, const config::Site& site,
                     const config::ChannelSettings& settings, UtcNs today, Comparison& comparison,
                     ChannelCalibration& entry) {
  const std::string logbook = request.logbook.empty() ? site.logbook.path : request.logbook;
  entry.date = today;
  const auto typed = [&](const std::vector<std::string>& texts, const char* option,
                         CalibrationReading::Kind kind) -> Status {
    for (const std::string& text : texts) {
      const auto [shown, reference] = halves(text);
      const auto shown_v = volts_of(shown);
      const auto reference_v = volts_of(reference);
      if (!shown_v || !reference_v)
        return wrong(std::string(option) + " " + text, "this is no pair of voltages",
                     "write LOGGER=REFERENCE in volts, such as 228.4=230.1");
      comparison.readings.push_back({{kind, *shown_v, *reference_v}, {}});
    }
    return kDone;
  };
  if (auto taken = typed(request.readings, "--reading", CalibrationReading::Kind::ac); !taken) return taken;
  if (auto taken = typed(request.dc_readings, "--dc-reading", CalibrationReading::Kind::dc); !taken)
    return taken;
  if (!comparison.readings.empty()) {
    if (auto sound = check_logger_has_it(logbook, settings); !sound) return sound;
  }
  if (request.at.empty()) return kDone;
  if (comparison.rms_only)
    return wrong("--at", "of a meter that is polled the logbook keeps no 3-s values",
                 "read both displays at the same time and give --reading");

  if (logbook.empty())
    return wrong("--at", "no logbook is named", "give --logbook, or logbook.path in the site file");
  const auto reader = storage::LogbookReader::open(logbook);
  if (!reader) return reader.error();
  UtcNs latest{0};
  for (const std::string& text : request.at) {
    const auto [time_text, reference] = halves(text);
    const auto reference_v = volts_of(reference);
    if (!reference_v || !(*reference_v > 0.0))
      return wrong("--at " + text, "the reference's voltage is missing", "write TIME=REFERENCE, in volts");
    const auto time = time_of(time_text, site, "--at");
    if (!time) return time.error();
    const double allowed_v =
        std::hypot(comparison.reference_expanded_pct / 100.0 * *reference_v, comparison.reference_expanded_v);
    auto reading = logged_reading(reader.value(), time.value(), *reference_v, allowed_v, settings);
    if (!reading) return wrong("--at " + text, reading.error().what, reading.error().remedy);
    comparison.readings.push_back(reading.value());
    latest = std::max(latest, time.value());
  }
  if (request.readings.empty() && request.dc_readings.empty()) entry.date = latest;
  if (entry.reference_date && *entry.reference_date > entry.date)
    return wrong("--reference-date", "the reference's certificate is younger than the comparison",
                 "give the certificate that was in force");
  return kDone;
}

// ---- the answer --------------------------------------------------------------------------------------

/// Puts the entry into the file, in the place of the channel's old one.
Status write(const std::string& path, const config::Site& site, const ChannelCalibration& entry) {
  std::vector<ChannelCalibration> channels = site.calibration.channels;
  std::erase_if(channels, [&](const ChannelCalibration& c) { return c.channel == entry.channel; });
  channels.push_back(entry);
  std::sort(channels.begin(), channels.end(),
            [](const ChannelCalibration& a, const ChannelCalibration& b) { return a.channel < b.channel; });
  const std::string text = config::calibration_text(channels);
  config::Findings findings;
  (void)config::parse_calibration(text, path, findings);
  if (!findings.faults.empty())
    return Error{"", "it would not be read back: " + findings.faults.front().text(path),
                 "nothing was written"};
  return replace_file(path, text);
}

ExitStatus calibrate(const Request& request, const config::Site& site) {
  const UtcNs today = now();
  if (request.readings.empty() && request.dc_readings.empty() && request.at.empty()) {
    std::cerr << cautions() << indented(kHow, 0);
    return tell(
        wrong("calibrate", "there is no reading", "give --reading or --at; --show for what is in force"),
        ExitStatus::wrong_usage);
  }
  (request.json ? std::cerr : std::cout) << cautions();
  const auto channel = channel_of(request.channel, site);
  if (!channel) return tell(channel.error(), ExitStatus::wrong_usage);
  const auto settings =
      *std::find_if(site.channels.begin(), site.channels.end(),
                    [&](const config::ChannelSettings& s) { return s.channel == channel.value(); });
  const ChannelCalibration* in_force = site.calibration.of(channel.value());

  ChannelCalibration entry;
  entry.channel = channel.value();
  entry.site_scale = in_force != nullptr ? in_force->site_scale : settings.scale;
  entry.site_offset = in_force != nullptr ? in_force->site_offset : settings.offset;
  Comparison comparison;
  comparison.nominal_v = site.nominal_v;
  comparison.rms_only = std::holds_alternative<config::PolledMeterSettings>(site.source);
  if (in_force != nullptr) {
    comparison.gain_now = in_force->gain;
    comparison.offset_now_v = in_force->offset_v;
    comparison.offset_now_expanded_v = in_force->offset_expanded_v;
  }
  for (const auto& taken :
       {take_reference(request, site, today, comparison, entry), take_conditions(request, comparison, entry),
        take_readings(request, site, settings, today, comparison, entry), take_due(request, site, entry)}) {
    if (!taken) return tell(taken.error(), ExitStatus::wrong_usage);
  }
  const auto figures = calibration_figures(comparison);
  if (!figures) return tell(figures.error(), ExitStatus::wrong_usage);
  entry.gain = figures.value().gain;
  entry.offset_v = figures.value().offset_v;
  entry.expanded_pct = figures.value().expanded_pct;
  entry.expanded_v = figures.value().expanded_v;
  entry.k = figures.value().k;
  entry.offset_expanded_v = figures.value().offset_expanded_v;
  for (SensorReading r : comparison.readings) {
    // What the logbook gives has digits that mean nothing.
    r.reading.shown_v = std::round(r.reading.shown_v * 1e4) / 1e4;
    entry.readings.push_back(r.reading);
  }

  const std::string path = config::calibration_path(request.site_file);
  if (!request.json) std::cout << comparison_text(figures.value(), entry, site) << '\n';
  if (!request.dry_run) {
    if (auto written = write(path, site, entry); !written)
      return tell(written.error(), ExitStatus::could_not);
  }
  if (request.json) {
    ordered_json json = comparison_json(figures.value(), entry, site, today);
    json["file"] = path;
    json["written"] = !request.dry_run;
    std::cout << json.dump(2, ' ', false, ordered_json::error_handler_t::replace) << '\n';
  } else if (request.dry_run) {
    std::cout << "Nothing was written (--dry-run).\n";
  } else {
    std::cout << (in_force != nullptr ? "Replaced the calibration of " : "Wrote the calibration of ")
              << config::name_of(entry.channel) << " in " << path << ".\n"
              << "It is in force once tramlined has read the site file again: send it HUP, or restart it.\n";
  }
  return ExitStatus::answered;
}

ExitStatus run(const Request& request) {
  config::SiteFile file = config::read_site_file(request.site_file);
  if (!file.ok()) return tell({"", file.fault_text(), ""}, ExitStatus::wrong_usage);
  return request.show
             ? show_calibration({request.site_file, request.logbook, request.json}, *file.site, now())
             : calibrate(request, *file.site);
}

}  // namespace

void add_calibrate(CLI::App& app, ExitStatus& status) {
  CLI::App* command = app.add_subcommand(
      "calibrate", "Compare a sensor with a reference meter, and keep its gain, offset and uncertainty.");
  auto request = std::make_shared<Request>();
  command->add_option("SITE", request->site_file, "the site file")->required();
  command->add_option("--channel", request->channel, "\"input L1\"; input or output at a single-phase site");
  const auto repeated = [&](const char* name, std::vector<std::string>& into, const char* what) {
    command->add_option(name, into, what)->allow_extra_args(false);
  };
  repeated("--reading", request->readings,
           "LOGGER=REFERENCE, volts r.m.s. at the same time; may be repeated");
  repeated("--dc-reading", request->dc_readings,
           "LOGGER=REFERENCE, d.c. volts, the reference 0 with the sensor's input shorted; may be repeated");
  repeated("--at", request->at, "TIME=REFERENCE, the logger's value from its logbook; may be repeated");
  command->add_option("--logbook", request->logbook, "the logbook for --at and --show; absent: the site's");
  command->add_option("--reference-uncertainty", request->reference_uncertainty,
                      "the reference's expanded uncertainty: 0.5% of its reading, or 1.2V");
  command->add_option("--reference-k", request->reference_k, "its coverage factor")->capture_default_str();
  command->add_option("--reference", request->reference, "what the reference is, and its certificate");
  command->add_option("--reference-date", request->reference_date, "date of that certificate");
  command->add_option("--resolution", request->resolution_v, "one step of the logger's value as read, V");
  command->add_option("--reference-resolution", request->reference_resolution_v,
                      "one step of the reference's display, V");
  command->add_option("--temperature", request->temperature_c, "of the sensor, °C");
  command->add_option("--temperature-coefficient", request->temperature_coefficient_ppm_per_k,
                      "of the sensor, ppm/K");
  command->add_option("--temperature-span", request->temperature_span_k,
                      "how far its temperature goes from that of now, K");
  command->add_option("--due", request->due, "when it is to be done again");
  command->add_option("--valid-for", request->valid_for, "the same, as a duration: 365d");
  command->add_option("--note", request->note, "anything else worth keeping");
  command->add_flag("--dry-run", request->dry_run, "write nothing");
  command->add_flag("--show", request->show, "only show what is in force; with --logbook also what was");
  command->add_flag("--json", request->json, "answer for programs: JSON, times in UTC");
  command->callback([request, &status] { status = run(*request); });
}

}  // namespace tramline::tools
