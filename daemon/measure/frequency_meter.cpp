#include "daemon/measure/frequency_meter.hpp"

#include <limits>

namespace tramline::measure {
namespace {

constexpr std::int64_t kTenSecondsNs = 10 * kNsPerSecond;

std::int64_t ten_seconds_of(UtcNs t) {
  return t.value / kTenSecondsNs - (t.value % kTenSecondsNs < 0 ? 1 : 0);
}

}  // namespace

void FrequencyMeter::reference_tick(const GridTick& tick, const SampleClock& clock) {
  if (tick.extended) return;
  if (!tick.rising) {
    if (counting_ && (!tick.measured || tick.jump)) counting_->trusted = false;
    return;
  }
  const UtcNs utc = clock.utc_of(tick.at);
  const std::int64_t number = ten_seconds_of(utc);
  if (counting_ && counting_->number != number) {
    counting_->to_tick = true;
    pending_.push_back(*counting_);
    counting_.reset();
  }
  if (!counting_) {
    counting_ = Count{};
    counting_->number = number;
    counting_->first = tick.at;
    counting_->first_utc = utc;
    counting_->first_elapsed_ns = clock.elapsed_ns(tick.at);
    counting_->from_tick = last_number_.has_value() && *last_number_ != number;
    counting_->trusted = tick.measured;
  } else {
    ++counting_->cycles;
    if (!tick.measured || tick.jump) counting_->trusted = false;
  }
  counting_->last = tick.at;
  counting_->last_utc = utc;
  counting_->last_elapsed_ns = clock.elapsed_ns(tick.at);
  last_number_ = number;
}

void FrequencyMeter::give_out_until(SamplePosition seen, const FlagTimeline& flags,
                                    std::vector<storage::Record>& out) {
  while (!pending_.empty() && pending_.front().last < seen) {
    give_out(pending_.front(), flags, out);
    pending_.pop_front();
  }
}

void FrequencyMeter::finish(const FlagTimeline& flags, std::vector<storage::Record>& out) {
  if (counting_) pending_.push_back(*counting_);
  counting_.reset();
  last_number_.reset();
  give_out_until(std::numeric_limits<double>::infinity(), flags, out);
}

void FrequencyMeter::give_out(const Count& count, const FlagTimeline& flags,
                              std::vector<storage::Record>& out) const {
  storage::Frequency record;
  record.begin = count.from_tick ? UtcNs{count.number * kTenSecondsNs} : count.first_utc;
  record.end = count.to_tick ? UtcNs{(count.number + 1) * kTenSecondsNs} : count.last_utc;
  record.cycles = count.cycles;
  record.trusted = count.trusted && count.cycles > 0;
  if (count.cycles > 0) {
    record.hz = count.cycles * static_cast<double>(kNsPerSecond) /
                static_cast<double>(count.last_elapsed_ns - count.first_elapsed_ns);
  }
  record.flagged = flags.meets(side_, count.first, count.last);
  record.clock = clock_state_;
  out.emplace_back(record);
}

SamplePosition FrequencyMeter::oldest_pending() const {
  if (!pending_.empty()) return pending_.front().first;
  return counting_ ? counting_->first : std::numeric_limits<double>::infinity();
}

}  // namespace tramline::measure
