#include "daemon/measure/event_detector.hpp"

#include <algorithm>
#include <cmath>

namespace tramline::measure {
namespace {

using storage::EventEnd;
using storage::EventKind;

std::size_t index_of(Phase phase) {
  return static_cast<std::size_t>(phase);
}

std::uint8_t bit_of(Phase phase) {
  return static_cast<std::uint8_t>(1U << index_of(phase));
}

}  // namespace

EventDetector::EventDetector(Side side, const std::vector<Phase>& phases, double nominal_v,
                             const config::EventSettings& settings)
    : phase_count_(phases.size()) {
  const double hysteresis_v = settings.hysteresis_pct / 100.0 * nominal_v;
  const auto watch = [&](EventKind kind, double threshold_pct, double direction) {
    Watch w;
    w.kind = kind;
    w.threshold_v = threshold_pct / 100.0 * nominal_v;
    w.end_v = w.threshold_v + direction * hysteresis_v;
    w.event.side = side;
    w.event.kind = kind;
    w.event.reference_v = nominal_v;
    w.event.threshold_v = w.threshold_v;
    w.event.hysteresis_v = hysteresis_v;
    return w;
  };
  watches_ = {watch(EventKind::sag, settings.sag_pct, 1.0), watch(EventKind::swell, settings.swell_pct, -1.0),
              watch(EventKind::interruption, settings.interruption_pct, 1.0)};
}

bool EventDetector::past_threshold(const Watch& watch, double volts) const {
  return watch.kind == EventKind::swell ? volts > watch.threshold_v : volts < watch.threshold_v;
}

bool EventDetector::recovered(const Watch& watch, double volts) const {
  return watch.kind == EventKind::swell ? volts <= watch.end_v : volts >= watch.end_v;
}

bool EventDetector::begins(const Watch& watch) const {
  std::size_t past = 0;
  for (const Latest& latest : latest_) {
    past += latest.known && past_threshold(watch, latest.value.value.u_rms_v) ? 1U : 0U;
  }
  return watch.kind == EventKind::interruption ? past == phase_count_ : past > 0;
}

bool EventDetector::ends(const Watch& watch) const {
  std::size_t back = 0;
  std::size_t known = 0;
  for (const Latest& latest : latest_) {
    known += latest.known ? 1U : 0U;
    back += latest.known && recovered(watch, latest.value.value.u_rms_v) ? 1U : 0U;
  }
  return watch.kind == EventKind::interruption ? back > 0 : back == known;
}

void EventDetector::take(const HalfCycle& half_cycle, std::size_t index, std::vector<EventMark>& out) {
  latest_[index_of(half_cycle.channel.phase)] = {true, half_cycle};
  last_ = half_cycle;
  const double volts = half_cycle.value.u_rms_v;
  const bool calm = volts >= sag().threshold_v && volts <= swell().threshold_v;
  if (calm && open_count_ == 0) return;
  for (Watch& watch : watches_) {
    if (watch.open) {
      if (ends(watch)) {
        end(watch, half_cycle, EventEnd::recovered, index, out);
      } else {
        follow(watch, half_cycle);
      }
    } else if (begins(watch)) {
      begin(watch, half_cycle, index, out);
    }
  }
}

void EventDetector::begin(Watch& watch, const HalfCycle& by, std::size_t index, std::vector<EventMark>& out) {
  watch.open = true;
  ++open_count_;
  watch.begin = by.value.begin;
  watch.begin_elapsed_ns = by.elapsed_ns;
  storage::Event& event = watch.event;
  event.begin_sample = {std::llround(by.value.begin)};
  event.begin = by.begin;
  event.begin_window_end = by.begin + by.window_ns;
  event.end_reason = EventEnd::open;
  event.end = by.begin;
  event.end_window_end = event.begin_window_end;
  event.duration_ns = 0;
  event.phases = 0;
  event.extreme_v = storage::kNotMeasured;
  event.extreme_is_bound = false;
  for (const Latest& latest : latest_) {
    if (latest.known && past_threshold(watch, latest.value.value.u_rms_v)) follow(watch, latest.value);
  }
  out.push_back({index, false, watch.begin, watch.begin, event});
}

void EventDetector::follow(Watch& watch, const HalfCycle& value) const {
  storage::Event& event = watch.event;
  const double volts = value.value.u_rms_v;
  if (past_threshold(watch, volts))
    event.phases = static_cast<std::uint8_t>(event.phases | bit_of(value.channel.phase));
  const bool further = std::isnan(event.extreme_v) ||
                       (watch.kind == EventKind::swell ? volts > event.extreme_v : volts < event.extreme_v);
  if (further) {
    event.extreme_v = volts;
    event.worst_phase = value.channel.phase;
  }
  if (value.value.over_range && (further || watch.kind == EventKind::swell)) event.extreme_is_bound = true;
}

void EventDetector::end(Watch& watch, const HalfCycle& by, EventEnd reason, std::size_t index,
                        std::vector<EventMark>& out) {
  watch.open = false;
  --open_count_;
  storage::Event& event = watch.event;
  event.end_reason = reason;
  event.end = by.begin;
  event.end_window_end = by.begin + by.window_ns;
  event.duration_ns = by.elapsed_ns - watch.begin_elapsed_ns;
  out.push_back({index, true, watch.begin, by.value.begin, event});
}

void EventDetector::close(EventEnd reason, std::size_t index, std::vector<EventMark>& out) {
  for (Watch& watch : watches_) {
    if (watch.open) end(watch, last_, reason, index, out);
  }
  latest_ = {};
}

}  // namespace tramline::measure
