#include "daemon/measure/meter.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numeric>

namespace tramline::measure {
namespace {

constexpr std::size_t kChunk = 2048;
constexpr double kProgressEverySeconds = 60.0;
constexpr std::int64_t kTolerableStepNs = 5 * kNsPerMillisecond;

std::vector<Channel> channels_of(const config::Site& site) {
  std::vector<Channel> channels;
  for (const auto& settings : site.channels)
    channels.push_back(settings.channel);
  return channels;
}

std::vector<Phase> phases_of(const std::vector<Channel>& channels, Side side) {
  std::vector<Phase> phases;
  for (const Channel& channel : channels) {
    if (channel.side == side) phases.push_back(channel.phase);
  }
  return phases;
}

const char* text_of(GapCause cause) {
  switch (cause) {
    case GapCause::not_a_number:
      return "no number in the recording";
    case GapCause::time_jump:
      return "the recording's time jumps";
    case GapCause::rate_change:
      return "the sample rate changes";
    case GapCause::overrun:
      return "samples came faster than they were taken";
    case GapCause::none:
    case GapCause::samples_lost:
      break;
  }
  return "samples lost";
}

const char* text_of(AnchorCause cause) {
  return cause == AnchorCause::refined ? "the time of the samples was measured anew" : "the clock was set";
}

}  // namespace

Meter::Meter(const config::Site& site, const StreamShape& stream)
    : channels_(channels_of(site)),
      rate_hz_(stream.rate_hz),
      clock_(stream.begin, stream.rate_hz),
      capture_(channels_, stream.rate_hz, site.capture),
      queues_(channels_.size()),
      ticks_(channels_.size()),
      detectors_(2),
      aggregator_(channels_, site.nominal_hz > 55.0 ? 12 : 10),
      frequency_(channels_.front().side),
      why_begun_(stream.why_begun) {
  // Far enough back for a whole 10/12-cycle block and for a capture, at the lowest frequency.
  const double cycle = stream.rate_hz / site.nominal_hz / 0.8;
  const auto keep = std::max<std::size_t>(static_cast<std::size_t>(18.0 * cycle),
                                          capture_.samples_before() + static_cast<std::size_t>(6.0 * cycle)) +
                    kChunk;
  meters_.reserve(channels_.size());
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    meters_.emplace_back(stream.rate_hz, site.nominal_hz, site.nominal_v, keep, kChunk);
  }
  for (const Side side : {Side::input, Side::output}) {
    const std::vector<Phase> phases = phases_of(channels_, side);
    if (phases.empty()) continue;
    detectors_[static_cast<std::size_t>(side)].emplace(side, phases, site.nominal_v, site.events);
  }
}

void Meter::clock_state(const storage::ClockState& state) {
  clock_state_ = state;
  aggregator_.clock_state(state);
  frequency_.clock_state(state);
}

void Meter::take(const Block& block, MeterOutput& out) {
  if (in_stretch_ && block.first != next_sample_) {
    const std::int64_t lost = block.first - next_sample_;
    const double lost_ms = static_cast<double>(lost) / rate_hz_ * 1000.0;
    std::string text(text_of(block.gap));
    text += ": " + std::to_string(lost) + " samples (" + std::to_string(std::llround(lost_ms)) + " ms)";
    end_stretch(storage::EventEnd::gap, text, out);
    why_begun_ = "after a gap";
  }
  if (block.anchor) {
    const std::int64_t step = clock_.anchor(*block.anchor);
    if (in_stretch_ && std::abs(step) > kTolerableStepNs) {
      out.records.emplace_back(
          storage::ClockChange{block.anchor->utc, text_of(block.anchor->cause), step, clock_state_});
    }
  }
  if (!in_stretch_) begin_stretch(block.first, why_begun_, out);
  for (const OverRangeSpan& span : block.over_range) {
    const std::int64_t from = block.first.value + static_cast<std::int64_t>(span.first_frame);
    meters_[span.channel].over_range(from, from + static_cast<std::int64_t>(span.frames));
  }
  for (std::size_t from = 0; from < block.frames(); from += kChunk) {
    take_chunk(block, from, std::min(kChunk, block.frames() - from), out);
  }
}

void Meter::begin_stretch(SampleIndex at, const std::string& why, MeterOutput& out) {
  in_stretch_ = true;
  stretch_begin_ns_ = clock_.elapsed_ns(static_cast<double>(at.value));
  next_sample_ = at;
  next_progress_ = static_cast<double>(at.value) + kProgressEverySeconds * rate_hz_;
  for (HalfCycleRms& meter : meters_)
    meter.restart(at);
  const auto begin = static_cast<double>(at.value);
  out.records.emplace_back(storage::CoverageBegin{at, clock_.utc_of(begin), why});
}

std::int64_t Meter::measured_ns(SamplePosition until) const {
  return clock_.elapsed_ns(until) - stretch_begin_ns_;
}

void Meter::take_chunk(const Block& block, std::size_t from, std::size_t frames, MeterOutput& out) {
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    ticks_[c].clear();
    meters_[c].feed(block.channel(c).subspan(from, frames), queues_[c].values, ticks_[c]);
  }
  next_sample_ = next_sample_ + static_cast<std::int64_t>(frames);
  for (const GridTick& tick : ticks_.front()) {
    aggregator_.reference_tick(tick, clock_, meters_);
    frequency_.reference_tick(tick, clock_);
  }
  give_out_half_cycles(false, out);
  capture_.collect(meters_);
}

std::optional<std::size_t> Meter::earliest(bool all) const {
  std::optional<std::size_t> best;
  for (std::size_t c = 0; c < queues_.size(); ++c) {
    if (queues_[c].empty()) {
      if (all) continue;
      return std::nullopt;
    }
    if (!best || queues_[c].front().begin < queues_[*best].front().begin) best = c;
  }
  return best;
}

void Meter::give_out_half_cycles(bool all, MeterOutput& out) {
  while (const auto channel = earliest(all)) {
    give_out(*channel, out);
    ++queues_[*channel].next;
  }
  for (Queue& queue : queues_) {
    queue.values.erase(queue.values.begin(), queue.values.begin() + static_cast<std::ptrdiff_t>(queue.next));
    queue.next = 0;
  }
}

void Meter::give_out(std::size_t channel_index, MeterOutput& out) {
  const HalfCycleValue& value = queues_[channel_index].front();
  HalfCycle half_cycle{channel_index,
                       channels_[channel_index],
                       value,
                       clock_.utc_of(value.begin),
                       clock_.elapsed_ns(value.begin),
                       0};
  half_cycle.window_ns = clock_.elapsed_ns(value.end) - half_cycle.elapsed_ns;
  out.half_cycles.push_back(half_cycle);

  const SamplePosition seen = value.begin;
  capture_.give_out_until(seen, meters_, clock_, out.records);
  const std::size_t events_before = out.events.size();
  detectors_[static_cast<std::size_t>(half_cycle.channel.side)]->take(half_cycle, out.half_cycles.size() - 1,
                                                                      out.events);
  note_events(events_before, out);
  aggregator_.take(half_cycle, flags_, out.records);
  frequency_.give_out_until(seen, flags_, out.records);
  if (seen >= next_progress_) {
    out.records.emplace_back(storage::CoverageProgress{half_cycle.begin, measured_ns(seen)});
    next_progress_ += kProgressEverySeconds * rate_hz_;
    flags_.forget_before(std::min({seen, aggregator_.oldest_pending(), frequency_.oldest_pending()}));
  }
}

void Meter::note_events(std::size_t from, MeterOutput& out) {
  for (std::size_t i = from; i < out.events.size(); ++i) {
    EventMark& mark = out.events[i];
    mark.event.clock = clock_state_;
    if (mark.ended) {
      flags_.ended(mark.event.side, mark.begin, mark.end);
      capture_.event_ended(mark.begin, mark.end);
    } else {
      flags_.began(mark.event.side, mark.begin);
      capture_.event_began(mark.begin);
    }
  }
}

void Meter::end_stretch(storage::EventEnd reason, const std::string& why, MeterOutput& out) {
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    ticks_[c].clear();
    meters_[c].finish(queues_[c].values, ticks_[c]);
  }
  for (const GridTick& tick : ticks_.front()) {
    aggregator_.reference_tick(tick, clock_, meters_);
    frequency_.reference_tick(tick, clock_);
  }
  give_out_half_cycles(true, out);
  const std::size_t events_before = out.events.size();
  const std::size_t last = out.half_cycles.empty() ? 0 : out.half_cycles.size() - 1;
  for (auto& detector : detectors_) {
    if (detector) detector->close(reason, last, out.events);
  }
  note_events(events_before, out);
  out.stretch_ends.push_back({last, reason});
  capture_.finish(meters_, clock_, out.records);
  aggregator_.gap(flags_, out.records);
  frequency_.finish(flags_, out.records);
  flags_.forget_before(std::numeric_limits<double>::infinity());
  const auto end = static_cast<double>(next_sample_.value);
  out.records.emplace_back(storage::CoverageEnd{clock_.utc_of(end), measured_ns(end), why});
  in_stretch_ = false;
}

void Meter::finish(storage::EventEnd reason, const std::string& why, MeterOutput& out) {
  if (in_stretch_) end_stretch(reason, why, out);
  aggregator_.close(flags_, out.records);
}

}  // namespace tramline::measure
