#include "tools/verdict.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>
#include <iterator>

#include "config/time_text.hpp"
#include "tools/calibration_words.hpp"
#include "tools/paragraph.hpp"
#include "tools/words.hpp"

namespace tramline::tools {
namespace {

using config::format_duration;

void add(Extreme& extreme, double volts, const storage::Aggregate& of, bool higher) {
  if (std::isnan(volts)) return;
  if (!std::isnan(extreme.volts) && (higher ? volts <= extreme.volts : volts >= extreme.volts)) return;
  extreme = {volts, of.begin, of.end};
}

void add_coverage(const Evidence& evidence, VerdictFigures& figures) {
  std::optional<UtcNs> last_end;
  for (const Measured& stretch : evidence.coverage) {
    const UtcNs begin = evidence.from ? std::max(*evidence.from, stretch.begin) : stretch.begin;
    const UtcNs end = evidence.to ? std::min(*evidence.to, stretch.end) : stretch.end;
    if (end <= begin) continue;
    const bool cut = begin != stretch.begin || end != stretch.end;
    figures.measured_ns += cut ? end - begin : stretch.measured_ns;
    if (!last_end) figures.from = begin;
    if (last_end && begin > *last_end) {
      ++figures.gaps;
      figures.longest_gap_ns = std::max(figures.longest_gap_ns, begin - *last_end);
    }
    last_end = last_end ? std::max(*last_end, end) : end;
  }
  figures.to = last_end.value_or(UtcNs{});
  if (evidence.from) figures.from = *evidence.from;
  if (evidence.to) figures.to = *evidence.to;
  figures.span_ns = std::max<std::int64_t>(0, figures.to - figures.from);
}

void add_event(const storage::Event& event, const Evidence& evidence, VerdictFigures& figures) {
  if (event.kind != storage::EventKind::out_of_band) {
    OfSide& side = event.side == Side::input ? figures.input : figures.output;
    ++side.events[static_cast<std::size_t>(event.kind)];
    if (event.held_off.value_or(false)) ++side.held_off;
    return;
  }
  ++figures.excursions;
  figures.excursions_ns += event.duration_ns;
  OfOrigin& origin = figures.by_origin[static_cast<std::size_t>(event.origin)];
  ++origin.times;
  origin.total_ns += event.duration_ns;
  if (!figures.longest || event.duration_ns > figures.longest->duration_ns) figures.longest = event;
  const double target = evidence.site.regulator ? evidence.site.regulator->target_v : evidence.site.nominal_v;
  const auto distance = [&](const storage::Event& e) { return std::abs(e.extreme_v - target); };
  if (!figures.worst || distance(event) > distance(*figures.worst)) figures.worst = event;
}

/// Nothing if the sensor of the event was not calibrated when it began.
std::optional<Weighed> weighed(const storage::Event& event, const Evidence& evidence,
                               const config::Site::Band& band) {
  const CalibrationSince* in_force = nullptr;
  for (const CalibrationSince& since : evidence.calibrations) {
    if (in_force == nullptr || since.from <= event.begin) in_force = &since;
  }
  const auto* calibration =
      in_force == nullptr ? nullptr : in_force->calibration.of({event.side, event.worst_phase});
  if (calibration == nullptr || std::isnan(event.extreme_v)) return std::nullopt;
  Weighed w;
  w.which = event.extreme_v < (band.low_v + band.high_v) / 2.0 ? Limit::lower : Limit::upper;
  w.limit_v = w.which == Limit::lower ? band.low_v : band.high_v;
  w.expanded_v = config::expanded_v_at(*calibration, event.extreme_v);
  w.allowance = allowance(event.extreme_v, w.limit_v, w.which, w.expanded_v);
  // What lies beyond a bound can only be further out.
  if (event.extreme_is_bound && w.allowance != Allowance::outside) w.allowance = Allowance::undecided;
  return w;
}

Answer answer_of(const Evidence& evidence, const VerdictFigures& figures) {
  if (figures.measured_ns == 0) return Answer::nothing_measured;
  if (!evidence.site.has(Side::output)) return Answer::no_output;
  if (!evidence.site.regulator) return Answer::no_regulator;
  return figures.excursions == 0 ? Answer::held : Answer::not_held;
}

// ---- words -------------------------------------------------------------------------------------------

std::string times_text(std::int64_t n) {
  return n == 1 ? "once" : n == 2 ? "twice" : fmt::format("{} times", n);
}

std::string when(UtcNs t, const Evidence& evidence, int decimals = 0) {
  if (!evidence.dated) return format_duration(t.value) + " from the begin";
  return config::format_in_zone(t, evidence.site.zone, decimals);
}

std::string band_text(const VerdictFigures& figures) {
  return fmt::format("{:.1f} to {:.1f} V", figures.band.low_v, figures.band.high_v);
}

/// "the regulator is to blame for 1 of them (25 min 12 s)" and so on, for each origin that there is.
std::string blame(const VerdictFigures& figures) {
  const auto of = [&](storage::Origin origin) { return figures.by_origin[static_cast<std::size_t>(origin)]; };
  const OfOrigin regulator = of(storage::Origin::regulator);
  const OfOrigin supply = of(storage::Origin::supply);
  const OfOrigin undecided = of(storage::Origin::undecided);
  std::vector<std::string> parts;
  const auto part = [&](const char* who, const OfOrigin& o) {
    if (o.times > 0)
      parts.push_back(fmt::format("{} {} ({})", who,
                                  o.times == figures.excursions ? "all" : std::to_string(o.times),
                                  format_duration(o.total_ns)));
  };
  part("the regulator for", regulator);
  part("the supply for", supply);
  std::string text;
  for (std::size_t i = 0; i < parts.size(); ++i)
    text += (i == 0 ? "To blame is " : i + 1 == parts.size() ? " and " : ", ") + parts[i];
  if (undecided.times > 0) {
    text += fmt::format("{}{} undecided ({})", text.empty() ? "" : "; ",
                        undecided.times == 1 ? "1 is" : fmt::format("{} are", undecided.times),
                        format_duration(undecided.total_ns));
  }
  if (!text.empty()) text += '.';
  return text;
}

std::string sentence(const Evidence& evidence, const VerdictFigures& figures) {
  switch (figures.answer) {
    case Answer::nothing_measured:
      return "Nothing was measured in this period, so nothing can be said about it.";
    case Answer::no_output:
      return "This site has no sensor on the output, so whether a regulator held its band cannot be said. "
             "The supply was between " +
             band_text(figures) + " for " +
             share_text(static_cast<double>(figures.input.in_band),
                        static_cast<double>(figures.input.half_cycles)) +
             " of the time measured.";
    case Answer::no_regulator:
      return "The site file describes no regulator, so there is no band to hold. The load got between " +
             band_text(figures) + " for " +
             share_text(static_cast<double>(figures.output.in_band),
                        static_cast<double>(figures.output.half_cycles)) +
             " of the time measured.";
    case Answer::held:
      return "The regulator held its band of " + band_text(figures) +
             ": the output never left it for longer than " +
             format_duration(std::llround(evidence.site.regulator->grace_s * 1e9)) + ".";
    case Answer::not_held:
      break;
  }
  return "The regulator did not hold its band of " + band_text(figures) + ": the output left it " +
         times_text(figures.excursions) + ", for " + format_duration(figures.excursions_ns) + " in all. " +
         blame(figures);
}

std::string extreme_text(const Extreme& extreme, const Evidence& evidence) {
  if (std::isnan(extreme.volts)) return "not measured";
  std::string text = volts_text(extreme.volts);
  // Month, day, hour and minute of the ten minutes it lies in.
  if (evidence.dated)
    text += ", " + config::format_in_zone(extreme.begin, evidence.site.zone, 0).substr(5, 11);
  return text;
}

void put_sides(const Evidence& evidence, const VerdictFigures& f, std::string& out) {
  const auto share = [](const OfSide& side, std::int64_t part) {
    return side.measured ? share_text(static_cast<double>(part), static_cast<double>(side.half_cycles))
                         : std::string("not measured");
  };
  const auto row = [&](std::string_view what, const std::string& input, const std::string& output) {
    fmt::format_to(std::back_inserter(out), "  {:<38}{:<26}{}\n", what, input, output);
  };
  row("", side_text(Side::input), side_text(Side::output));
  row("in band, share of half cycles", share(f.input, f.input.in_band), share(f.output, f.output.in_band));
  if (f.output.measured) row("  below the band", "", share(f.output, f.output.low));
  if (f.output.measured) row("  above the band", "", share(f.output, f.output.high));
  row("lowest half cycle", extreme_text(f.input.lowest, evidence), extreme_text(f.output.lowest, evidence));
  row("highest half cycle", extreme_text(f.input.highest, evidence),
      extreme_text(f.output.highest, evidence));
  static constexpr const char* kKinds[] = {"sags", "swells", "interruptions"};
  for (std::size_t kind = 0; kind < 3; ++kind) {
    const auto count = [kind](const OfSide& side) {
      return side.measured ? std::to_string(side.events[kind]) : std::string("not measured");
    };
    row(kKinds[kind], count(f.input), count(f.output));
  }
  if (f.input.measured && f.output.measured && evidence.site.regulator) {
    const std::int64_t events = f.input.events[0] + f.input.events[1] + f.input.events[2];
    row("of these, held off from the load", fmt::format("{} of {}", f.input.held_off, events), "");
  }
}

void put_excursion(std::string_view which, const storage::Event& event, const std::optional<Weighed>& of,
                   const Evidence& evidence, std::string& out) {
  fmt::format_to(
      std::back_inserter(out), "\n{}: {}, {} for {}{}; origin: {}.\n", which, when(event.begin, evidence),
      volts_text(event.extreme_v) + (event.extreme_is_bound ? " or beyond" : ""),
      format_duration(event.duration_ns),
      event.end_reason == storage::EventEnd::recovered ? std::string()
                                                       : ", " + std::string(name_of(event.end_reason)),
      name_of(event.origin));
  if (!event.reason.empty()) out += indented(event.reason + ".", 2);
  if (of) {
    out += indented(fmt::format("Against the band's {} edge, {:.1f} V, and good for ±{} V: {}.",
                                of->which == Limit::lower ? "lower" : "upper", of->limit_v,
                                uncertainty_text(of->expanded_v), words_for(of->allowance)),
                    2);
  }
}

void put_calibration(const Evidence& evidence, const VerdictFigures& figures, std::string& out) {
  const bool any =
      std::any_of(evidence.calibrations.begin(), evidence.calibrations.end(),
                  [](const CalibrationSince& since) { return !since.calibration.channels.empty(); });
  if (!any) {
    out +=
        "\nNo calibration: voltages rest on the site file's scale alone, their uncertainty is not stated.\n";
    return;
  }
  out += "\nCalibration of the sensors at the end of the period:\n";
  for (const config::ChannelSettings& settings : evidence.site.channels) {
    const auto* calibration = evidence.calibrations.back().calibration.of(settings.channel);
    fmt::format_to(
        std::back_inserter(out), "  {:<11}{}\n", config::name_of(settings.channel),
        calibration == nullptr
            ? "no calibration: rests on the site file's scale alone, uncertainty not stated"
            : calibration_words(*calibration, evidence.site.nominal_v, evidence.site.zone, figures.to));
  }
  if (evidence.calibrations.size() == 1) return;
  std::string changes;
  for (std::size_t i = 1; i < evidence.calibrations.size(); ++i)
    changes += (changes.empty() ? "" : ", ") + when(evidence.calibrations[i].from, evidence);
  out +=
      indented("The calibration changed within the period (" + changes +
                   "): extremes and shares join voltages of both; see `tramline calibrate --show --logbook`.",
               0);
}

void put_coverage(const Evidence& evidence, const VerdictFigures& f, std::string& out) {
  fmt::format_to(
      std::back_inserter(out), "\nMeasured: {} of {} ({})", format_duration(f.measured_ns),
      format_duration(f.span_ns),
      share_text(static_cast<double>(std::min(f.measured_ns, f.span_ns)), static_cast<double>(f.span_ns)));
  if (f.gaps > 0)
    fmt::format_to(std::back_inserter(out), ", with {} {}, the longest {}", f.gaps,
                   f.gaps == 1 ? "gap" : "gaps", format_duration(f.longest_gap_ns));
  out += ". What was not measured is in no figure above.\n";
  if (evidence.from || evidence.to) {
    out +=
        "Shares, extremes and the servo's figures are those of the whole ten minutes that the period "
        "touches.\n";
  }
  if (evidence.records_lost > 0)
    fmt::format_to(std::back_inserter(out), "{} records were lost on the way to the logbook.\n",
                   evidence.records_lost);
  const std::string clock = evidence.dated ? clock_text(evidence.ten_minutes) : "";
  if (!clock.empty()) out += clock + "\n";
  if (!evidence.dated) out += "The recording is undated: times count from its begin.\n";
  out += "Samples from: " + evidence.source + "\n";
}

}  // namespace

VerdictFigures verdict_figures(const Evidence& evidence) {
  VerdictFigures figures;
  figures.band = evidence.site.band();
  figures.input.measured = evidence.site.has(Side::input);
  figures.output.measured = evidence.site.has(Side::output);
  add_coverage(evidence, figures);
  for (const auto& interval : evidence.intervals) {
    figures.input.half_cycles += interval.input_half_cycles;
    figures.input.in_band += interval.input_in_band;
    figures.output.half_cycles += interval.output_half_cycles;
    figures.output.in_band += interval.output_in_band;
    figures.output.low += interval.output_low;
    figures.output.high += interval.output_high;
    figures.pairs += interval.pairs;
    figures.correctable += interval.correctable;
    figures.corrections += interval.corrections;
    figures.reversals += interval.reversals;
    figures.travel += interval.travel;
  }
  for (const auto& aggregate : evidence.ten_minutes) {
    OfSide& side = aggregate.channel.side == Side::input ? figures.input : figures.output;
    add(side.lowest, aggregate.u_min_v, aggregate, false);
    add(side.highest, aggregate.u_max_v, aggregate, true);
  }
  for (const auto& event : evidence.events)
    add_event(event, evidence, figures);
  if (figures.longest) figures.longest_weighed = weighed(*figures.longest, evidence, figures.band);
  if (figures.worst) figures.worst_weighed = weighed(*figures.worst, evidence, figures.band);
  figures.answer = answer_of(evidence, figures);
  return figures;
}

std::string verdict_text(const Evidence& evidence, const VerdictFigures& figures) {
  std::string out = evidence.site.name + ", ";
  if (figures.answer == Answer::nothing_measured)
    return out + "no coverage.\n\n" + indented(sentence(evidence, figures), 0);
  out += when(figures.from, evidence) + " to " + when(figures.to, evidence) + "\n\n" +
         indented(sentence(evidence, figures), 0) + "\n";
  if (evidence.readings_every_ns > 0)
    out += indented(readings_text(evidence.readings_every_ns, !evidence.sampled), 0) + "\n";
  put_sides(evidence, figures, out);
  if (figures.answer == Answer::not_held) {
    fmt::format_to(std::back_inserter(out), "\n  {:<38}{:<10}in all\n", "excursions of the output, by origin",
                   "times");
    for (const storage::Origin origin :
         {storage::Origin::supply, storage::Origin::regulator, storage::Origin::undecided}) {
      const OfOrigin& of = figures.by_origin[static_cast<std::size_t>(origin)];
      fmt::format_to(std::back_inserter(out), "  {:<38}{:<10}{}\n", name_of(origin), of.times,
                     of.times > 0 ? format_duration(of.total_ns) : "");
    }
    put_excursion("Longest", *figures.longest, figures.longest_weighed, evidence, out);
    const bool same = figures.worst->begin_sample == figures.longest->begin_sample;
    if (!same) put_excursion("Worst", *figures.worst, figures.worst_weighed, evidence, out);
  }
  if (figures.pairs > 0 && !evidence.sampled && evidence.readings_every_ns > 0) {
    out += "\nThe servo's corrections cannot be told from readings so far apart: not measured.\n";
  } else if (figures.pairs > 0) {
    out += "\n" +
           indented(
               fmt::format(
                   "The servo made {} corrections ({} of them turned back within 10 s), {:.2f} of ratio in "
                   "all; the "
                   "supply was within what it can correct for {} of the half cycles with a ratio.",
                   figures.corrections, figures.reversals, figures.travel,
                   share_text(static_cast<double>(figures.correctable), static_cast<double>(figures.pairs))),
               0);
  }
  put_calibration(evidence, figures, out);
  put_coverage(evidence, figures, out);
  return out;
}

}  // namespace tramline::tools
