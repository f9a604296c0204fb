#include "daemon/regulator/excursion_detector.hpp"

#include <cmath>

namespace tramline::regulator {
namespace {

constexpr std::int64_t kBackForNs = 200 * kNsPerMillisecond;

}  // namespace

ExcursionDetector::ExcursionDetector(Phase phase, const config::Site& site)
    : site_(site),
      band_(site.tolerated_band()),
      grace_ns_(site.regulator ? std::llround(site.regulator->grace_s * 1e9) : 0),
      sag_v_(site.events.sag_pct / 100.0 * site.nominal_v),
      swell_v_(site.events.swell_pct / 100.0 * site.nominal_v) {
  event_.side = Side::output;
  event_.kind = storage::EventKind::out_of_band;
  event_.phases = static_cast<std::uint8_t>(1U << static_cast<unsigned>(phase));
  event_.worst_phase = phase;
  event_.reference_v = site.regulator ? site.regulator->target_v : site.nominal_v;
}

std::optional<storage::Event> ExcursionDetector::take(const HalfCyclePair& pair, bool ideal_in_band) {
  last_ = pair;
  const bool in_band = band_.holds(pair.output_v);
  if (!out_) {
    if (in_band) return std::nullopt;
    begin(pair);
  }
  figures_.take(pair, site_, ideal_in_band);
  if (in_band) {
    if (!back_) back_ = pair;
    if (pair.elapsed_ns - back_->elapsed_ns < kBackForNs) return std::nullopt;
    if (counted_) return end(storage::EventEnd::recovered);
    out_ = false;
    return std::nullopt;
  }
  back_.reset();
  const bool far = pair.output_v < sag_v_ || pair.output_v > swell_v_;
  if (counted_ || (!far && pair.elapsed_ns - begin_ns_ <= grace_ns_)) return std::nullopt;
  counted_ = true;
  storage::Event event = event_;
  event.end = pair.begin;
  event.end_window_end = pair.begin + pair.window_ns;
  event.duration_ns = pair.elapsed_ns - begin_ns_;
  event.extreme_v = figures_.worst_output_v;
  return event;
}

void ExcursionDetector::begin(const HalfCyclePair& pair) {
  out_ = true;
  counted_ = false;
  back_.reset();
  begin_ns_ = pair.elapsed_ns;
  figures_ = {};
  event_.begin_sample = {std::llround(pair.at)};
  event_.begin = pair.begin;
  event_.begin_window_end = pair.begin + pair.window_ns;
  event_.threshold_v = pair.output_v < band_.low_v ? site_.band().low_v : site_.band().high_v;
  event_.end_reason = storage::EventEnd::open;
}

storage::Event ExcursionDetector::end(storage::EventEnd reason) {
  const HalfCyclePair& at = back_ ? *back_ : last_;
  out_ = counted_ = false;
  storage::Event event = event_;
  event.end_reason = reason;
  event.end = at.begin;
  event.end_window_end = at.begin + at.window_ns;
  event.duration_ns = at.elapsed_ns - begin_ns_;
  event.extreme_v = figures_.worst_output_v;
  event.input_low_v = figures_.input_low_v;
  event.input_high_v = figures_.input_high_v;
  event.ratio_low = figures_.ratio_low;
  event.ratio_high = figures_.ratio_high;
  Judgement judgement = judge(figures_, site_);
  event.origin = judgement.origin;
  event.reason = std::move(judgement.reason);
  return event;
}

std::optional<storage::Event> ExcursionDetector::close(storage::EventEnd reason) {
  const bool was_counted = counted_;
  if (was_counted) return end(reason);
  out_ = false;
  return std::nullopt;
}

}  // namespace tramline::regulator
