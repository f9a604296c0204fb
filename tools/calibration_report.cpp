#include "tools/calibration_report.hpp"

#include <spdlog/fmt/fmt.h>

#include <cmath>
#include <iterator>
#include <nlohmann/json.hpp>

#include "tools/calibration_words.hpp"
#include "tools/paragraph.hpp"

namespace tramline::tools {
namespace {

using config::CalibrationReading;
using config::ChannelCalibration;
using nlohmann::ordered_json;

std::string kind_text(CalibrationReading::Kind kind) {
  return kind == CalibrationReading::Kind::ac ? "a.c." : "d.c.";
}

}  // namespace

std::string comparison_text(const CalibrationFigures& figures, const ChannelCalibration& entry,
                            const config::Site& site) {
  std::string out = fmt::format("{}, {}\n\n", site.name, config::name_of(entry.channel));
  const auto put = std::back_inserter(out);
  fmt::format_to(put, "  {:<6}{:>14}{:>14}{:>22}{:>14}\n", "", "logger, V", "reference, V", "error as found",
                 "as left, V");
  for (const ReadingFigures& r : figures.readings) {
    const bool ac = r.reading.kind == CalibrationReading::Kind::ac;
    const std::string error =
        ac ? fmt::format("{:+.3f} V {:+.2f} %", r.error_v, 100.0 * r.error_v / r.reading.reference_v)
           : fmt::format("{:+.3f} V        ", r.error_v);
    fmt::format_to(put, "  {:<6}{:>14.3f}{:>14.3f}{:>22}{:>+14.3f}\n", kind_text(r.reading.kind),
                   r.reading.shown_v, r.reading.reference_v, error,
                   std::round(r.residual_v * 1e3) / 1e3 + 0.0);
  }
  fmt::format_to(
      put, "\nGain {:.7g}, offset {:.5g} V{}: volts = (site file's volts + offset) x gain.\n", entry.gain,
      entry.offset_v,
      entry.offset_expanded_v ? fmt::format(" (±{} V)", uncertainty_text(*entry.offset_expanded_v)) : "");

  fmt::format_to(put, "\n  {:<36}{:<6}{:<22}{:>18}\n",
                 "uncertainty at " + fmt::format("{:g} V", site.nominal_v), "type", "distribution",
                 "standard, V");
  for (const BudgetLine& line : figures.budget)
    fmt::format_to(put, "  {:<36}{:<6}{:<22}{:>18.4f}\n", line.component, line.type, line.distribution,
                   line.standard_v);
  fmt::format_to(put, "  {:<36}{:<6}{:<22}{:>18.4f}\n", "combined", "", "", figures.combined_v);
  std::string expanded =
      fmt::format("Expanded uncertainty (k = 2, about 95 %): ±{} V at {:g} V, {:g} % of the voltage",
                  uncertainty_text(figures.expanded_at_nominal_v), site.nominal_v, figures.expanded_pct);
  expanded += figures.expanded_v > 0.0
                  ? fmt::format(" and {} V, added as squares.", uncertainty_text(figures.expanded_v))
                  : std::string(": a gain that is wrong is wrong in proportion.");
  out += "\n" + indented(expanded, 0);
  for (const std::string& remark : figures.remarks)
    out += indented("Note: " + remark, 0);
  return out;
}

ordered_json comparison_json(const CalibrationFigures& figures, const ChannelCalibration& entry,
                             const config::Site& site, UtcNs today) {
  ordered_json json;
  json["site"] = site.name;
  json["calibration"] = json_of(entry, site.nominal_v, today);
  json["readings"] = ordered_json::array();
  for (const ReadingFigures& r : figures.readings) {
    json["readings"].push_back({{"kind", r.reading.kind == CalibrationReading::Kind::ac ? "ac" : "dc"},
                                {"shown_v", r.reading.shown_v},
                                {"reference_v", r.reading.reference_v},
                                {"error_v", r.error_v},
                                {"residual_v", r.residual_v}});
  }
  json["budget"] = ordered_json::array();
  for (const BudgetLine& line : figures.budget) {
    json["budget"].push_back({{"component", line.component},
                              {"type", std::string(1, line.type)},
                              {"distribution", line.distribution},
                              {"standard_v", line.standard_v},
                              {"proportional", line.proportional}});
  }
  json["combined_v"] = figures.combined_v;
  json["linear"] = figures.linear;
  json["remarks"] = figures.remarks;
  return json;
}

}  // namespace tramline::tools
