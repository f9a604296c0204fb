#include "tools/json_records.hpp"

#include <cmath>
#include <nlohmann/json.hpp>
#include <string>

#include "config/time_text.hpp"
#include "tools/words.hpp"

namespace tramline::tools {
namespace {

using nlohmann::ordered_json;

ordered_json figure(double value) {
  return std::isnan(value) ? ordered_json(nullptr) : ordered_json(value);
}

ordered_json phases(std::uint8_t bits) {
  ordered_json list = ordered_json::array();
  for (unsigned p = 0; p < 3; ++p) {
    if ((bits >> p & 1U) != 0) list.push_back(std::string(name_of(static_cast<Phase>(p))));
  }
  return list;
}

}  // namespace

ordered_json json_of(const storage::Event& event) {
  ordered_json json;
  json["side"] = std::string(name_of(event.side));
  json["kind"] = std::string(name_of(event.kind));
  json["phases"] = phases(event.phases);
  json["begin"] = config::format_utc(event.begin, 6);
  json["end"] = event.end_reason == storage::EventEnd::open ? ordered_json(nullptr)
                                                            : ordered_json(config::format_utc(event.end, 6));
  json["end_reason"] = std::string(name_of(event.end_reason));
  json["duration_s"] = seconds(event.duration_ns);
  json["begin_window_end"] = config::format_utc(event.begin_window_end, 6);
  json["end_window_end"] = config::format_utc(event.end_window_end, 6);
  json["extreme_v"] = figure(event.extreme_v);
  json["extreme_is_bound"] = event.extreme_is_bound;
  json["worst_phase"] = std::string(name_of(event.worst_phase));
  json["reference_v"] = event.reference_v;
  json["threshold_v"] = event.threshold_v;
  json["hysteresis_v"] = event.hysteresis_v;
  json["origin"] = std::string(name_of(event.origin));
  json["reason"] = event.reason;
  json["held_off"] = event.held_off ? ordered_json(*event.held_off) : ordered_json(nullptr);
  json["input_low_v"] = figure(event.input_low_v);
  json["input_high_v"] = figure(event.input_high_v);
  json["ratio_low"] = figure(event.ratio_low);
  json["ratio_high"] = figure(event.ratio_high);
  json["clock"] = std::string(name_of(event.clock.trust));
  json["clock_error_bound_s"] = event.clock.error_bound_ns >= 0
                                    ? ordered_json(seconds(event.clock.error_bound_ns))
                                    : ordered_json(nullptr);
  return json;
}

}  // namespace tramline::tools
