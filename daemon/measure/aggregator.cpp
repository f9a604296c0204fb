#include "daemon/measure/aggregator.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <utility>

namespace tramline::measure {
namespace {

constexpr std::int64_t kTenMinutesNs = 600 * kNsPerSecond;
constexpr std::int64_t kTicksATwoHours = 12;
constexpr int kBlocksAThreeSeconds = 15;
// Blocks begin at the first half-cycle tick after the 10-minute tick, so a full interval may lack that much.
constexpr std::int64_t kFullTenMinutesNs = kTenMinutesNs - 100 * kNsPerMillisecond;

std::int64_t floor_div(std::int64_t a, std::int64_t b) {
  return a / b - (a % b < 0 ? 1 : 0);
}

}  // namespace

void Aggregator::Extremes::take(double low, double high) {
  low_v = std::fmin(low_v, low);
  high_v = std::fmax(high_v, high);
}

Aggregator::Aggregator(std::vector<Channel> channels, int cycles_a_block)
    : channels_(std::move(channels)), half_cycles_a_block_(2 * cycles_a_block) {}

void Aggregator::reference_tick(const GridTick& tick, const SampleClock& clock,
                                const std::vector<HalfCycleRms>& meters) {
  const std::int64_t now = floor_div(clock.utc_of(tick.at).value, kTenMinutesNs);
  const bool new_series = tick_ != now;
  if (new_series) {
    for (Series& series : series_)
      series.ending = true;
    tick_ = now;
  }
  for (Series& series : series_) {
    if (++series.half_cycles < half_cycles_a_block_) continue;
    complete_block(series, tick, clock, meters);
    series.blocks = (series.blocks + 1) % kBlocksAThreeSeconds;
    if (!series.ending || series.blocks != 0) begin_block(series, tick, clock);
  }
  std::erase_if(series_, [this](const Series& series) { return series.half_cycles >= half_cycles_a_block_; });
  if (new_series) {
    series_.push_back({series_begun_++, false, 0, 0});
    begin_block(series_.back(), tick, clock);
  }
}

void Aggregator::begin_block(Series& series, const GridTick& tick, const SampleClock& clock) {
  series.half_cycles = 0;
  Block block;
  block.series = series.number;
  block.begin = tick.at;
  block.begin_utc = clock.utc_of(tick.at);
  if (!series.ending) block.tick = tick_;
  block.channels.resize(channels_.size());
  pending_.push_back(std::move(block));
}

void Aggregator::complete_block(const Series& series, const GridTick& tick, const SampleClock& clock,
                                const std::vector<HalfCycleRms>& meters) {
  const auto block = std::find_if(pending_.begin(), pending_.end(),
                                  [&](const Block& b) { return b.series == series.number && !b.complete; });
  block->complete = true;
  block->end = tick.at;
  block->end_utc = clock.utc_of(tick.at);
  block->length_ns = clock.elapsed_ns(block->end) - clock.elapsed_ns(block->begin);
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    ChannelOfBlock& channel = block->channels[c];
    channel.mean_square =
        std::max(0.0, meters[c].history().energy(block->begin, block->end) / (block->end - block->begin));
    channel.over_range = meters[c].touches_over_range(block->begin, block->end);
  }
}

void Aggregator::take(const HalfCycle& half_cycle, const FlagTimeline& flags,
                      std::vector<storage::Record>& out) {
  const SamplePosition at = half_cycle.value.begin;
  give_out_until(at, flags, out);
  for (Block& block : pending_) {
    if (at < block.begin) break;
    if (block.complete && at >= block.end) continue;
    block.channels[half_cycle.channel_index].extremes.take(half_cycle.value.u_rms_v,
                                                           half_cycle.value.u_rms_v);
  }
}

void Aggregator::give_out_until(SamplePosition seen, const FlagTimeline& flags,
                                std::vector<storage::Record>& out) {
  while (!pending_.empty() && pending_.front().complete && pending_.front().end <= seen) {
    give_out(pending_.front(), flags, out);
    pending_.pop_front();
  }
}

void Aggregator::give_out(const Block& block, const FlagTimeline& flags, std::vector<storage::Record>& out) {
  std::vector<ChannelOfSum> of_block(channels_.size());
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    of_block[c] = {block.channels[c].mean_square, flags.meets(channels_[c].side, block.begin, block.end),
                   block.channels[c].over_range, block.channels[c].extremes};
  }

  auto three_seconds = std::find_if(three_seconds_.begin(), three_seconds_.end(),
                                    [&](const Sum& sum) { return sum.number == block.series; });
  std::optional<Sum> sum;
  if (three_seconds != three_seconds_.end()) {
    sum = std::move(*three_seconds);
    three_seconds_.erase(three_seconds);
  } else {
    sum = Sum{};
    sum->number = block.series;
    sum->begin = block.begin_utc;
  }
  sum->end = block.end_utc;
  add(block, of_block, sum);
  if (sum->blocks == kBlocksAThreeSeconds) {
    end_three_seconds(*sum, out);
  } else {
    three_seconds_.push_back(std::move(*sum));
  }

  if (!block.tick) return;
  if (ten_minutes_ && ten_minutes_->number != *block.tick) end_ten_minutes(out);
  if (!ten_minutes_) {
    ten_minutes_ = Sum{};
    ten_minutes_->number = *block.tick;
    ten_minutes_->begin = {*block.tick * kTenMinutesNs};
    ten_minutes_->end = ten_minutes_->begin + kTenMinutesNs;
  }
  add(block, of_block, ten_minutes_);
}

void Aggregator::add(const Block& block, const std::vector<ChannelOfSum>& of_block,
                     std::optional<Sum>& sum) const {
  sum->channels.resize(channels_.size());
  ++sum->inputs;
  ++sum->blocks;
  sum->measured_ns += block.length_ns;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    ChannelOfSum& into = sum->channels[c];
    into.squares += of_block[c].squares;
    into.flagged = into.flagged || of_block[c].flagged;
    into.over_range = into.over_range || of_block[c].over_range;
    into.extremes.take(of_block[c].extremes.low_v, of_block[c].extremes.high_v);
  }
}

void Aggregator::end_three_seconds(Sum& sum, std::vector<storage::Record>& out) {
  sum.partial = sum.blocks < kBlocksAThreeSeconds;
  give_out(sum, storage::Interval::three_seconds, out);
}

void Aggregator::end_ten_minutes(std::vector<storage::Record>& out) {
  Sum& ten = *ten_minutes_;
  ten.partial = ten.measured_ns < kFullTenMinutesNs;
  give_out(ten, storage::Interval::ten_minutes, out);

  const std::int64_t number = floor_div(ten.number, kTicksATwoHours);
  if (two_hours_ && two_hours_->number != number) end_two_hours(out);
  if (!two_hours_) {
    two_hours_ = Sum{};
    two_hours_->number = number;
    two_hours_->begin = {number * kTicksATwoHours * kTenMinutesNs};
    two_hours_->end = two_hours_->begin + kTicksATwoHours * kTenMinutesNs;
    two_hours_->channels.resize(channels_.size());
  }
  Sum& two = *two_hours_;
  ++two.inputs;
  two.blocks += ten.blocks;
  two.measured_ns += ten.measured_ns;
  two.partial = two.partial || ten.partial;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    ChannelOfSum& into = two.channels[c];
    into.squares += ten.channels[c].squares / ten.inputs;
    into.flagged = into.flagged || ten.channels[c].flagged;
    into.over_range = into.over_range || ten.channels[c].over_range;
    into.extremes.take(ten.channels[c].extremes.low_v, ten.channels[c].extremes.high_v);
  }
  ten_minutes_.reset();
}

void Aggregator::end_two_hours(std::vector<storage::Record>& out) {
  two_hours_->partial = two_hours_->partial || two_hours_->inputs < kTicksATwoHours;
  give_out(*two_hours_, storage::Interval::two_hours, out);
  two_hours_.reset();
}

void Aggregator::give_out(const Sum& sum, storage::Interval interval,
                          std::vector<storage::Record>& out) const {
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const ChannelOfSum& of = sum.channels[c];
    storage::Aggregate record;
    record.interval = interval;
    record.channel = channels_[c];
    record.begin = sum.begin;
    record.end = sum.end;
    record.u_rms_v = std::sqrt(of.squares / sum.inputs);
    record.u_min_v = of.extremes.low_v;
    record.u_max_v = of.extremes.high_v;
    record.blocks = sum.blocks;
    record.measured_ns = sum.measured_ns;
    record.flagged = of.flagged;
    record.partial = sum.partial;
    record.over_range = of.over_range;
    record.clock = clock_state_;
    out.emplace_back(record);
  }
}

void Aggregator::gap(const FlagTimeline& flags, std::vector<storage::Record>& out) {
  std::erase_if(pending_, [](const Block& block) { return !block.complete; });
  give_out_until(std::numeric_limits<double>::infinity(), flags, out);
  for (Sum& sum : three_seconds_)
    end_three_seconds(sum, out);
  three_seconds_.clear();
  series_.clear();
  tick_.reset();
}

void Aggregator::close(const FlagTimeline& flags, std::vector<storage::Record>& out) {
  gap(flags, out);
  if (ten_minutes_) end_ten_minutes(out);
  if (two_hours_) end_two_hours(out);
}

SamplePosition Aggregator::oldest_pending() const {
  return pending_.empty() ? std::numeric_limits<double>::infinity() : pending_.front().begin;
}

}  // namespace tramline::measure
