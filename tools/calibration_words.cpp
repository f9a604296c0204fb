#include "tools/calibration_words.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>

#include "config/time_text.hpp"

namespace tramline::tools {

std::string day_text(UtcNs t, const std::string& zone) {
  return config::format_in_zone(t, zone, 0).substr(0, 10);
}

std::string calibration_words(const config::ChannelCalibration& calibration, double nominal_v,
                              const std::string& zone, UtcNs now) {
  std::string text =
      fmt::format("calibrated {}; {:g} V is good for ±{} V (k = {:g}{})", day_text(calibration.date, zone),
                  nominal_v, uncertainty_text(config::expanded_v_at(calibration, nominal_v)), calibration.k,
                  calibration.k == 2.0 ? ", about 95 %" : "");
  if (config::past_due(calibration, now)) {
    text += "; PAST DUE since " + day_text(*calibration.due, zone);
  } else if (calibration.due) {
    text += "; due " + day_text(*calibration.due, zone);
  }
  return text;
}

std::string uncertainty_text(double volts) {
  if (!(volts > 0.0) || !std::isfinite(volts)) return "0";
  const int decimals = std::clamp(1 - static_cast<int>(std::floor(std::log10(volts))), 0, 6);
  return fmt::format("{:.{}f}", volts, decimals);
}

nlohmann::ordered_json json_of(const config::ChannelCalibration& c, double nominal_v, UtcNs now) {
  using nlohmann::ordered_json;
  const auto time = [](const std::optional<UtcNs>& t) {
    return t ? ordered_json(config::format_utc(*t)) : ordered_json(nullptr);
  };
  const auto figure = [](const std::optional<double>& x) {
    return x ? ordered_json(*x) : ordered_json(nullptr);
  };
  ordered_json json;
  json["side"] = std::string(tramline::name_of(c.channel.side));
  json["phase"] = std::string(tramline::name_of(c.channel.phase));
  json["date"] = config::format_utc(c.date);
  json["gain"] = c.gain;
  json["offset_v"] = c.offset_v;
  json["offset_expanded_v"] = figure(c.offset_expanded_v);
  json["expanded_pct"] = c.expanded_pct;
  json["expanded_v"] = c.expanded_v;
  json["expanded_at_nominal_v"] = config::expanded_v_at(c, nominal_v);
  json["k"] = c.k;
  json["reference"] = c.reference;
  json["reference_expanded_pct"] = c.reference_expanded_pct;
  json["reference_expanded_v"] = c.reference_expanded_v;
  json["reference_k"] = c.reference_k;
  json["reference_date"] = time(c.reference_date);
  json["due"] = time(c.due);
  json["past_due"] = config::past_due(c, now);
  return json;
}

}  // namespace tramline::tools
