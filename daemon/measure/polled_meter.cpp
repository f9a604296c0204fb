#include "daemon/measure/polled_meter.hpp"

#include <algorithm>
#include <cmath>
#include <utility>

namespace tramline::measure {
namespace {

constexpr std::int64_t kTenMinutesNs = 600 * kNsPerSecond;
constexpr std::int64_t kTwoHoursNs = 12 * kTenMinutesNs;
constexpr std::int64_t kProgressEveryMs = 60'000;
constexpr std::int64_t kTolerableStepNs = 5 * kNsPerMillisecond;

std::int64_t interval_of(UtcNs at, std::int64_t length_ns) {
  return at.value / length_ns - (at.value % length_ns < 0 ? 1 : 0);
}

}  // namespace

PolledMeter::PolledMeter(const config::Site& site, const StreamShape& stream, double readings_every_s)
    : every_ms_(std::llround(readings_every_s * 1000.0)),
      clock_(stream.begin, stream.rate_hz),
      detectors_(2),
      why_begun_(stream.why_begun) {
  for (const auto& settings : site.channels)
    channels_.push_back(settings.channel);
  for (const Side side : {Side::input, Side::output}) {
    std::vector<Phase> phases;
    for (const Channel& channel : channels_) {
      if (channel.side == side) phases.push_back(channel.phase);
    }
    if (phases.empty()) continue;
    detectors_[static_cast<std::size_t>(side)].emplace(side, phases, site.nominal_v, site.events);
  }
}

void PolledMeter::take(const Block& block, MeterOutput& out) {
  if (block.frames() == 0) return;
  if (in_stretch_ && 2 * (block.first - last_) > 5 * every_ms_) {
    end_stretch(storage::EventEnd::gap,
                "readings failed for " + std::to_string((block.first - last_) / 1000) + " s", out);
    why_begun_ = "after a gap";
  }
  if (block.anchor) {
    const std::int64_t step = clock_.anchor(*block.anchor);
    if (in_stretch_ && std::abs(step) > kTolerableStepNs) {
      out.records.emplace_back(
          storage::ClockChange{block.anchor->utc, "the clock was set", step, clock_state_});
    }
  }
  const auto position = static_cast<SamplePosition>(block.first.value);
  const UtcNs at = clock_.utc_of(position);
  const std::int64_t elapsed_ns = clock_.elapsed_ns(position);
  if (!in_stretch_) {
    in_stretch_ = true;
    stretch_begin_ns_ = elapsed_ns;
    next_progress_ms_ = block.first.value + kProgressEveryMs;
    out.records.emplace_back(storage::CoverageBegin{block.first, at, why_begun_});
  }
  last_ = block.first;
  const std::int64_t window_ns = every_ms_ * kNsPerMillisecond;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    HalfCycle reading;
    reading.channel_index = c;
    reading.channel = channels_[c];
    reading.value.begin = position;
    reading.value.end = position + static_cast<SamplePosition>(every_ms_);
    reading.value.u_rms_v = block.channel(c).front();
    reading.value.over_range = std::any_of(block.over_range.begin(), block.over_range.end(),
                                           [c](const OverRangeSpan& span) { return span.channel == c; });
    reading.begin = at;
    reading.elapsed_ns = elapsed_ns;
    reading.window_ns = window_ns;
    out.half_cycles.push_back(reading);
    const std::size_t events_before = out.events.size();
    detectors_[static_cast<std::size_t>(reading.channel.side)]->take(reading, out.half_cycles.size() - 1,
                                                                     out.events);
    note_events(events_before, out);
  }
  add(block, at, out);
  if (block.first.value >= next_progress_ms_) {
    out.records.emplace_back(storage::CoverageProgress{at, elapsed_ns - stretch_begin_ns_});
    next_progress_ms_ += kProgressEveryMs;
    flags_.forget_before(position);
  }
}

void PolledMeter::note_events(std::size_t from, MeterOutput& out) {
  for (std::size_t i = from; i < out.events.size(); ++i) {
    EventMark& mark = out.events[i];
    mark.event.clock = clock_state_;
    if (mark.ended) {
      flags_.ended(mark.event.side, mark.begin, mark.end);
    } else {
      flags_.began(mark.event.side, mark.begin);
    }
  }
}

void PolledMeter::add(const Block& block, UtcNs at, MeterOutput& out) {
  const std::int64_t number = interval_of(at, kTenMinutesNs);
  if (ten_minutes_ && ten_minutes_->number != number) end_ten_minutes(out);
  if (!ten_minutes_) {
    ten_minutes_.emplace();
    ten_minutes_->number = number;
    ten_minutes_->channels.resize(channels_.size());
  }
  ReadingSum& sum = *ten_minutes_;
  const std::int64_t length_ns = every_ms_ * kNsPerMillisecond;
  sum.measured_ns += length_ns;
  ++sum.readings;
  ++sum.inputs;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const double volts = block.channel(c).front();
    ReadingSum::OfChannel& of = sum.channels[c];
    of.squares += volts * volts;
    of.low_v = std::fmin(of.low_v, volts);
    of.high_v = std::fmax(of.high_v, volts);
    const auto from = static_cast<SamplePosition>(block.first.value);
    of.flagged = of.flagged || flags_.meets(channels_[c].side, from, from + static_cast<double>(every_ms_));
    of.over_range =
        of.over_range || std::any_of(block.over_range.begin(), block.over_range.end(),
                                     [c](const OverRangeSpan& span) { return span.channel == c; });
  }
}

void PolledMeter::end_ten_minutes(MeterOutput& out) {
  if (!ten_minutes_) return;
  const ReadingSum ended = *std::exchange(ten_minutes_, std::nullopt);
  give_out(ended, storage::Interval::ten_minutes, kTenMinutesNs, out);
  const std::int64_t number = interval_of({ended.number * kTenMinutesNs}, kTwoHoursNs);
  if (two_hours_ && two_hours_->number != number) end_two_hours(out);
  if (!two_hours_) {
    two_hours_.emplace();
    two_hours_->number = number;
    two_hours_->channels.resize(channels_.size());
  }
  ReadingSum& sum = *two_hours_;
  ++sum.inputs;
  sum.readings += ended.readings;
  sum.measured_ns += ended.measured_ns;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const ReadingSum::OfChannel& from = ended.channels[c];
    ReadingSum::OfChannel& of = sum.channels[c];
    of.squares += from.squares / ended.inputs;
    of.low_v = std::fmin(of.low_v, from.low_v);
    of.high_v = std::fmax(of.high_v, from.high_v);
    of.flagged = of.flagged || from.flagged;
    of.over_range = of.over_range || from.over_range;
  }
  if (interval_of({(ended.number + 1) * kTenMinutesNs}, kTwoHoursNs) != number) end_two_hours(out);
}

void PolledMeter::end_two_hours(MeterOutput& out) {
  if (!two_hours_) return;
  give_out(*two_hours_, storage::Interval::two_hours, kTwoHoursNs, out);
  two_hours_.reset();
}

void PolledMeter::give_out(const ReadingSum& sum, storage::Interval interval, std::int64_t length_ns,
                           MeterOutput& out) const {
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const ReadingSum::OfChannel& of = sum.channels[c];
    storage::Aggregate aggregate;
    aggregate.interval = interval;
    aggregate.channel = channels_[c];
    aggregate.begin = {sum.number * length_ns};
    aggregate.end = aggregate.begin + length_ns;
    aggregate.u_rms_v = std::sqrt(of.squares / sum.inputs);
    aggregate.u_min_v = of.low_v;
    aggregate.u_max_v = of.high_v;
    aggregate.blocks = sum.readings;
    aggregate.measured_ns = std::min(sum.measured_ns, length_ns);
    aggregate.flagged = of.flagged;
    // Readings do not fall on the tick, and one may be late.
    aggregate.partial = sum.measured_ns < length_ns - 3 * every_ms_ * kNsPerMillisecond;
    aggregate.over_range = of.over_range;
    aggregate.clock = clock_state_;
    out.records.emplace_back(aggregate);
  }
}

void PolledMeter::end_stretch(storage::EventEnd reason, const std::string& why, MeterOutput& out) {
  const std::size_t events_before = out.events.size();
  const std::size_t last = out.half_cycles.empty() ? 0 : out.half_cycles.size() - 1;
  for (auto& detector : detectors_) {
    if (detector) detector->close(reason, last, out.events);
  }
  note_events(events_before, out);
  out.stretch_ends.push_back({last, reason});
  const auto end = static_cast<SamplePosition>(last_.value + every_ms_);
  out.records.emplace_back(
      storage::CoverageEnd{clock_.utc_of(end), clock_.elapsed_ns(end) - stretch_begin_ns_, why});
  in_stretch_ = false;
}

void PolledMeter::finish(storage::EventEnd reason, const std::string& why, MeterOutput& out) {
  if (in_stretch_) end_stretch(reason, why, out);
  end_ten_minutes(out);
  end_two_hours(out);
}

}  // namespace tramline::measure
