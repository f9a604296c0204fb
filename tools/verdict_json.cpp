#include <cmath>
#include <nlohmann/json.hpp>

#include "config/time_text.hpp"
#include "tools/calibration_words.hpp"
#include "tools/json_records.hpp"
#include "tools/verdict.hpp"
#include "tools/words.hpp"

namespace tramline::tools {
namespace {

using nlohmann::ordered_json;

const char* word_for(Answer answer) {
  switch (answer) {
    case Answer::held:
      return "held";
    case Answer::not_held:
      return "not held";
    case Answer::no_output:
      return "output not measured";
    case Answer::no_regulator:
      return "no regulator described";
    case Answer::nothing_measured:
      break;
  }
  return "nothing measured";
}

ordered_json json_of(const Extreme& extreme) {
  if (std::isnan(extreme.volts)) return nullptr;
  return {{"v", extreme.volts},
          {"within_from", config::format_utc(extreme.begin)},
          {"within_to", config::format_utc(extreme.end)}};
}

ordered_json json_of(const OfSide& side) {
  if (!side.measured) return nullptr;
  ordered_json json;
  json["half_cycles"] = side.half_cycles;
  json["in_band"] = side.in_band;
  json["in_band_share"] =
      side.half_cycles > 0
          ? ordered_json(static_cast<double>(side.in_band) / static_cast<double>(side.half_cycles))
          : ordered_json(nullptr);
  json["lowest"] = json_of(side.lowest);
  json["highest"] = json_of(side.highest);
  json["sags"] = side.events[0];
  json["swells"] = side.events[1];
  json["interruptions"] = side.events[2];
  return json;
}

ordered_json json_of(const storage::Event& event, const std::optional<Weighed>& weighed) {
  ordered_json json = tools::json_of(event);
  json["allowing_for_uncertainty"] = weighed
                                         ? ordered_json{{"answer", std::string(name_of(weighed->allowance))},
                                                        {"limit_v", weighed->limit_v},
                                                        {"expanded_v", weighed->expanded_v}}
                                         : ordered_json(nullptr);
  return json;
}

ordered_json calibration_json(const Evidence& evidence, const VerdictFigures& figures) {
  ordered_json json{{"in_force", ordered_json::array()},
                    {"not_calibrated", ordered_json::array()},
                    {"changed_at", ordered_json::array()}};
  for (const config::ChannelSettings& settings : evidence.site.channels) {
    const auto* calibration = evidence.calibrations.empty()
                                  ? nullptr
                                  : evidence.calibrations.back().calibration.of(settings.channel);
    if (calibration == nullptr) {
      json["not_calibrated"].push_back(config::name_of(settings.channel));
    } else {
      json["in_force"].push_back(tools::json_of(*calibration, evidence.site.nominal_v, figures.to));
    }
  }
  for (std::size_t i = 1; i < evidence.calibrations.size(); ++i)
    json["changed_at"].push_back(config::format_utc(evidence.calibrations[i].from));
  return json;
}

}  // namespace

std::string verdict_json(const Evidence& evidence, const VerdictFigures& figures) {
  ordered_json json;
  json["site"] = evidence.site.name;
  json["answer"] = word_for(figures.answer);
  json["band_v"] = {figures.band.low_v, figures.band.high_v};
  json["dated"] = evidence.dated;
  json["from"] = config::format_utc(figures.from);
  json["to"] = config::format_utc(figures.to);
  json["coverage"] = {{"span_s", seconds(figures.span_ns)},
                      {"measured_s", seconds(figures.measured_ns)},
                      {"gaps", figures.gaps},
                      {"longest_gap_s", seconds(figures.longest_gap_ns)},
                      {"records_lost", evidence.records_lost}};
  json["input"] = json_of(figures.input);
  json["output"] = json_of(figures.output);
  if (figures.input.measured && figures.output.measured && evidence.site.regulator)
    json["input"]["held_off"] = figures.input.held_off;
  if (figures.output.measured) {
    json["output"]["below_band"] = figures.output.low;
    json["output"]["above_band"] = figures.output.high;
  }
  ordered_json origins;
  for (const storage::Origin origin :
       {storage::Origin::supply, storage::Origin::regulator, storage::Origin::undecided}) {
    const OfOrigin& of = figures.by_origin[static_cast<std::size_t>(origin)];
    origins[std::string(name_of(origin))] = {{"times", of.times}, {"total_s", seconds(of.total_ns)}};
  }
  json["excursions"] = {
      {"times", figures.excursions}, {"total_s", seconds(figures.excursions_ns)}, {"by_origin", origins}};
  json["excursions"]["longest"] =
      figures.longest ? json_of(*figures.longest, figures.longest_weighed) : ordered_json(nullptr);
  json["excursions"]["worst"] =
      figures.worst ? json_of(*figures.worst, figures.worst_weighed) : ordered_json(nullptr);
  // Readings of a meter lie too far apart to show them.
  const bool corrections_measured = evidence.sampled || evidence.readings_every_ns == 0;
  json["servo"] = {{"pairs", figures.pairs}, {"correctable", figures.correctable}};
  if (corrections_measured) {
    json["servo"]["corrections"] = figures.corrections;
    json["servo"]["reversals"] = figures.reversals;
    json["servo"]["travel"] = figures.travel;
  }
  json["readings_every_s"] = evidence.readings_every_ns > 0
                                 ? ordered_json(seconds(evidence.readings_every_ns))
                                 : ordered_json(nullptr);
  json["calibration"] = calibration_json(evidence, figures);
  json["source"] = evidence.source;
  json["written_by"] = evidence.program;
  return json.dump(2) + "\n";
}

}  // namespace tramline::tools
