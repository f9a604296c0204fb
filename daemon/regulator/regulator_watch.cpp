#include "daemon/regulator/regulator_watch.hpp"

#include <algorithm>
#include <cmath>
#include <utility>

namespace tramline::regulator {
namespace {

constexpr double kLeastInput = 0.10;  // of nominal: below, a ratio means nothing

}  // namespace

RegulatorWatch::PhaseWatch::PhaseWatch(Phase of, const config::Site& site, bool sampled)
    : phase(of),
      pairs(site.has(Side::input), site.has(Side::output), kLeastInput * site.nominal_v),
      keeping(of, site),
      excursions(of, site) {
  if (site.regulator) {
    ideal.emplace(*site.regulator, site.nominal_v);
    if (sampled) corrections.emplace(*site.regulator, site.nominal_v);
  }
}

RegulatorWatch::RegulatorWatch(const config::Site& site, bool sampled)
    : site_(site),
      band_(site.tolerated_band()),
      both_sides_(site.has(Side::input) && site.has(Side::output)) {
  for (const auto& settings : site.channels) {
    const Phase phase = settings.channel.phase;
    const bool known =
        std::any_of(phases_.begin(), phases_.end(), [&](const PhaseWatch& p) { return p.phase == phase; });
    if (known) continue;
    place_of_[static_cast<std::size_t>(phase)] = phases_.size();
    phases_.emplace_back(phase, site, sampled);
  }
}

void RegulatorWatch::take(const measure::MeterOutput& metered, std::vector<storage::Record>& out) {
  std::size_t event = 0;
  std::size_t end = 0;
  const auto take_marks_of = [&](std::size_t half_cycle) {
    for (; event < metered.events.size() && metered.events[event].after <= half_cycle; ++event) {
      take(metered.events[event], out);
    }
    for (; end < metered.stretch_ends.size() && metered.stretch_ends[end].after <= half_cycle; ++end) {
      end_stretch(metered.stretch_ends[end].reason, out);
    }
  };
  for (std::size_t i = 0; i < metered.half_cycles.size(); ++i) {
    take(metered.half_cycles[i], out);
    take_marks_of(i);
  }
  take_marks_of(metered.half_cycles.size());
}

void RegulatorWatch::take(const measure::HalfCycle& half_cycle, std::vector<storage::Record>& out) {
  PhaseWatch& phase = phases_[place_of_[static_cast<std::size_t>(half_cycle.channel.phase)]];
  if (auto ended = phase.keeping.take(half_cycle)) out.emplace_back(*ended);
  if (const auto pair = phase.pairs.take(half_cycle)) take(*pair, phase, out);
}

void RegulatorWatch::take(const HalfCyclePair& pair, PhaseWatch& phase, std::vector<storage::Record>& out) {
  phase.keeping.take(pair);
  if (phase.corrections) give_out(phase.corrections->take(pair), phase, out);
  if (std::isnan(pair.output_v)) return;

  bool ideal_in_band = false;
  if (phase.ideal && !std::isnan(pair.input_v)) {
    const bool excursion = phase.excursions.under_way() || !band_.holds(pair.output_v);
    ideal_in_band = band_.holds(phase.ideal->follow(pair, excursion));
  }
  if (phase.ideal) {
    if (auto event = phase.excursions.take(pair, ideal_in_band)) {
      event->clock = clock_;
      output_shows();
      out.emplace_back(std::move(*event));
    }
  }
  for (OpenEvent& open : open_) {
    if (open.side == Side::output && pair.at >= static_cast<double>(open.begin_sample.value) - 1.0) {
      open.figures[static_cast<std::size_t>(pair.phase)].take(pair, site_, ideal_in_band);
    }
  }
}

void RegulatorWatch::take(const measure::EventMark& mark, std::vector<storage::Record>& out) {
  storage::Event event = mark.event;
  if (event.side == Side::output) output_shows();
  const auto same = [&](const OpenEvent& open) {
    return open.side == event.side && open.kind == event.kind && open.begin_sample == event.begin_sample;
  };
  auto open = std::find_if(open_.begin(), open_.end(), same);
  if (!mark.ended) {
    if (open == open_.end()) {
      const bool already = std::any_of(phases_.begin(), phases_.end(),
                                       [](const PhaseWatch& p) { return p.excursions.open(); });
      open_.push_back({event.side, event.kind, event.begin_sample, {}, event.side == Side::input && already});
    }
  } else if (open != open_.end()) {
    if (event.side == Side::output) {
      const ExcursionFigures& figures = open->figures[static_cast<std::size_t>(event.worst_phase)];
      event.input_low_v = figures.input_low_v;
      event.input_high_v = figures.input_high_v;
      event.ratio_low = figures.ratio_low;
      event.ratio_high = figures.ratio_high;
      Judgement judgement = judge(figures, site_);
      event.origin = judgement.origin;
      event.reason = std::move(judgement.reason);
    } else if (both_sides_ && site_.regulator) {
      event.held_off = !open->output_showed;
    }
    open_.erase(open);
  }
  out.emplace_back(std::move(event));
}

void RegulatorWatch::output_shows() {
  for (OpenEvent& open : open_)
    open.output_showed = true;
}

void RegulatorWatch::give_out(std::optional<storage::Correction> correction, PhaseWatch& phase,
                              std::vector<storage::Record>& out) {
  if (!correction) return;
  correction->phase = phase.phase;
  phase.keeping.take(*correction, phase.corrections->last_was_reversal());
  out.emplace_back(*correction);
}

void RegulatorWatch::end_stretch(storage::EventEnd reason, std::vector<storage::Record>& out) {
  for (PhaseWatch& phase : phases_) {
    phase.pairs.restart();
    if (phase.ideal) phase.ideal->restart();
    if (phase.corrections) give_out(phase.corrections->restart(), phase, out);
    if (auto event = phase.excursions.close(reason)) {
      event->clock = clock_;
      out.emplace_back(std::move(*event));
    }
  }
}

void RegulatorWatch::finish(std::vector<storage::Record>& out) {
  for (PhaseWatch& phase : phases_) {
    if (const auto interval = phase.keeping.close()) out.emplace_back(*interval);
  }
}

}  // namespace tramline::regulator
