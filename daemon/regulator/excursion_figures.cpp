#include "daemon/regulator/excursion_figures.hpp"

#include <algorithm>
#include <cmath>
#include <cstdio>

#include "config/time_text.hpp"

namespace tramline::regulator {
namespace {

constexpr double kSameRatio = 0.01;  // a ratio that moved by less than this stood still

std::string volts_text(double volts) {
  char text[32];
  std::snprintf(text, sizeof text, std::abs(volts) < 99.95 ? "%.1f V" : "%.0f V", volts);
  return text;
}

std::string ratio_text(double ratio) {
  char text[32];
  std::snprintf(text, sizeof text, "%.2f", ratio);
  return text;
}

std::string beyond_range(const ExcursionFigures& figures, const config::Site& site) {
  const auto& regulator = *site.regulator;
  const bool low = figures.worst_output_v < regulator.target_v;
  const double input = figures.worst_input_v;
  if (input < site.events.interruption_pct / 100.0 * site.nominal_v) {
    return "the supply was interrupted (" + volts_text(input) + ")";
  }
  const double ratio = low ? regulator.ratio_max : regulator.ratio_min;
  return std::string("the supply ") + (low ? "fell to " : "rose to ") + volts_text(input) +
         "; with the regulator's " + (low ? "highest" : "lowest") + " ratio of " + ratio_text(ratio) +
         " the best possible output was " + volts_text(ratio * input);
}

std::string too_fast(const ExcursionFigures& figures, const config::Site& site) {
  std::string text = "the supply moved between " + volts_text(figures.input_low_v) + " and " +
                     volts_text(figures.input_high_v) + ", faster than a sound servo could follow";
  if (site.regulator->speed_v_per_s)
    text += " at " + volts_text(*site.regulator->speed_v_per_s) + " a second";
  return text;
}

std::string at_fault(const ExcursionFigures& figures, const config::Site& site) {
  const double needed = site.regulator->target_v / figures.worst_input_v;
  std::string text = "the supply stood at " + volts_text(figures.worst_input_v) + ", for which a ratio of " +
                     ratio_text(needed) + " would have been right; ";
  if (figures.worst_output_v < site.events.interruption_pct / 100.0 * site.nominal_v) {
    return text + "the output was lost (" + volts_text(figures.worst_output_v) +
           "), in the regulator or anywhere between the two sensors";
  }
  if (figures.ratio_high - figures.ratio_low < kSameRatio) {
    text += "the ratio stayed at " + ratio_text(figures.worst_ratio);
  } else {
    text += "the ratio was " + ratio_text(figures.worst_ratio) + " (between " +
            ratio_text(figures.ratio_low) + " and " + ratio_text(figures.ratio_high) + " meanwhile)";
  }
  return text + " and the output " +
         (figures.worst_output_v < site.regulator->target_v ? "fell to " : "rose to ") +
         volts_text(figures.worst_output_v);
}

std::string shares(const ExcursionFigures& figures) {
  return "; of the time out of band " + config::format_duration(figures.supply_ns) +
         " was the supply's doing and " + config::format_duration(figures.regulator_ns) + " the regulator's";
}

}  // namespace

void ExcursionFigures::take(const HalfCyclePair& pair, const config::Site& site, bool ideal_in_band) {
  const config::Site::Band band = site.tolerated_band();
  input_low_v = std::fmin(input_low_v, pair.input_v);
  input_high_v = std::fmax(input_high_v, pair.input_v);
  ratio_low = std::fmin(ratio_low, pair.ratio);
  ratio_high = std::fmax(ratio_high, pair.ratio);
  if (band.holds(pair.output_v)) return;

  const double target_v = site.regulator ? site.regulator->target_v : site.nominal_v;
  if (std::isnan(worst_output_v) ||
      std::abs(pair.output_v - target_v) > std::abs(worst_output_v - target_v)) {
    worst_output_v = pair.output_v;
    worst_input_v = pair.input_v;
    worst_ratio = pair.ratio;
  }
  const std::int64_t half_cycle_ns = pair.window_ns / 2;
  if (std::isnan(pair.input_v)) {
    unknown_ns += half_cycle_ns;
  } else if (ideal_in_band) {
    regulator_ns += half_cycle_ns;
  } else {
    supply_ns += half_cycle_ns;
    const bool in_range = site.regulator && pair.input_v * site.regulator->ratio_max >= band.low_v &&
                          pair.input_v * site.regulator->ratio_min <= band.high_v;
    if (!in_range) beyond_range_ns += half_cycle_ns;
  }
}

Judgement judge(const ExcursionFigures& figures, const config::Site& site) {
  if (!site.regulator) return {storage::Origin::not_judged, "no regulator is described in the site file"};
  if (!site.has(Side::input)) return {storage::Origin::undecided, "the input is not measured at this site"};
  const std::int64_t known_ns = figures.supply_ns + figures.regulator_ns;
  if (figures.unknown_ns >= known_ns)
    return {storage::Origin::undecided, "the input was not measured meanwhile"};

  Judgement judgement;
  if (figures.regulator_ns > figures.supply_ns) {
    judgement = {storage::Origin::regulator, at_fault(figures, site)};
  } else {
    const bool range = 2 * figures.beyond_range_ns > figures.supply_ns;
    judgement = {storage::Origin::supply, range ? beyond_range(figures, site) : too_fast(figures, site)};
  }
  const std::int64_t lesser = std::min(figures.supply_ns, figures.regulator_ns);
  if (4 * lesser > known_ns) judgement.reason += shares(figures);
  return judgement;
}

}  // namespace tramline::regulator
