#include "tools/calibration_show.hpp"

#include <spdlog/fmt/fmt.h>

#include <iostream>
#include <nlohmann/json.hpp>
#include <utility>

#include "config/calibration_file.hpp"
#include "config/time_text.hpp"
#include "storage/logbook_reader.hpp"
#include "tools/calibration_words.hpp"
#include "tools/question.hpp"

namespace tramline::tools {
namespace {

using config::ChannelCalibration;
using nlohmann::ordered_json;

/// Each change that the logbook holds.
Result<ordered_json> history_of(const std::string& logbook, const config::Site& site, UtcNs today,
                                std::string& text) {
  const auto reader = storage::LogbookReader::open(logbook);
  if (!reader) return reader.error();
  const auto rows = reader.value().calibrations();
  if (!rows) return rows.error();
  text = "\nHistory in " + logbook + ":\n";
  if (rows.value().empty()) text += "  no session of it was measured with a calibration\n";
  ordered_json history = ordered_json::array();
  for (const storage::CalibrationRow& row : rows.value()) {
    const std::string from = config::format_in_zone(row.calibration.from, site.zone, 0);
    ordered_json change{{"from", config::format_utc(row.calibration.from)}, {"session", row.session}};
    change["channels"] = ordered_json::array();
    if (row.calibration.text.empty()) text += "  from " + from + ": none\n";
    if (!row.calibration.text.empty()) {
      config::Findings findings;
      const config::Calibration calibration =
          config::parse_calibration(row.calibration.text, "calibration in the logbook", findings);
      if (!findings.faults.empty())
        return Error{logbook, "a calibration kept in it is not understood", "use a newer version"};
      text += "  from " + from + ":\n";
      for (const ChannelCalibration& c : calibration.channels) {
        change["channels"].push_back(json_of(c, site.nominal_v, today));
        text += fmt::format("    {:<11}gain {:.7g}, offset {:.5g} V, calibrated {}, ±{} V at {:g} V\n",
                            config::name_of(c.channel), c.gain, c.offset_v, day_text(c.date, site.zone),
                            uncertainty_text(config::expanded_v_at(c, site.nominal_v)), site.nominal_v);
      }
    }
    history.push_back(std::move(change));
  }
  return history;
}

}  // namespace

ExitStatus show_calibration(const ShowRequest& request, const config::Site& site, UtcNs today) {
  std::string out = fmt::format("{}: calibration of the sensors\n\n", site.name);
  ordered_json json{{"site", site.name}, {"file", nullptr}, {"channels", ordered_json::array()}};
  if (!site.calibration.text.empty()) json["file"] = config::calibration_path(request.site_file);
  bool any_past_due = false;
  for (const config::ChannelSettings& settings : site.channels) {
    const ChannelCalibration* c = site.calibration.of(settings.channel);
    if (c == nullptr) {
      out += fmt::format("  {:<11}not calibrated: its voltages rest on the site file's scale alone\n",
                         config::name_of(settings.channel));
      continue;
    }
    any_past_due = any_past_due || config::past_due(*c, today);
    json["channels"].push_back(json_of(*c, site.nominal_v, today));
    out += fmt::format("  {:<11}{}\n", config::name_of(c->channel),
                       calibration_words(*c, site.nominal_v, site.zone, today));
    out +=
        fmt::format("  {:<11}gain {:.7g}, offset {:.5g} V; by {}{}\n", "", c->gain, c->offset_v, c->reference,
                    c->reference_date ? ", certified " + day_text(*c->reference_date, site.zone) : "");
    if (!c->note.empty()) out += fmt::format("  {:<11}{}\n", "", c->note);
  }
  if (!request.logbook.empty()) {
    std::string text;
    auto history = history_of(request.logbook, site, today, text);
    if (!history) return tell(history.error(), ExitStatus::wrong_usage);
    json["history"] = std::move(history).value();
    out += text;
  }
  std::cout << (request.json ? json.dump(2, ' ', false, ordered_json::error_handler_t::replace) + "\n" : out);
  return any_past_due ? ExitStatus::answered_bad : ExitStatus::answered;
}

}  // namespace tramline::tools
