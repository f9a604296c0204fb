#include "daemon/measure/cycle_grid.hpp"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace tramline::measure {
namespace {

constexpr double kLeastFundamental = 0.02;  // of nominal: below, noise would set the crossings
constexpr double kEarliest = 0.30;          // of a cycle after the last tick
constexpr double kLatest = 0.85;           // more than half a cycle later, so a crossing always falls between
constexpr double kPeriodRange = 0.16;      // 15 % and a little, for the ends of the range themselves
constexpr double kSteadyAmplitude = 0.01;  // largest relative change in a cycle called undisturbed
constexpr double kSteadyPeriod = 0.002;
constexpr double kJump = 0.01;
constexpr int kFlywheelTicks =
    8;  // the band-pass spreads a step over four, and it takes three more to be sure
constexpr double kFlywheelReach =
    0.15;  // of a cycle: what a step in amplitude alone can do to a crossing, and more
constexpr double kLongestStart = 4.0;  // cycles to wait for a good period before running free

}  // namespace

CycleGrid::CycleGrid(double nominal_period, double nominal_v)
    : nominal_period_(nominal_period),
      least_amplitude_v_(kLeastFundamental * nominal_v * std::numbers::sqrt2),
      period_(nominal_period) {}

void CycleGrid::restart(SamplePosition origin) {
  origin_ = origin;
  last_ = origin;
  past_count_ = 0;
  starting_ = true;
  held_count_ = 0;
  flywheel_ticks_ = 0;
  unbroken_ = restless_ = 0;
  gone_ = seen_ = false;
}

void CycleGrid::follow(std::span<const Crossing> crossings, SamplePosition progress,
                       std::vector<GridTick>& out) {
  for (const Crossing& crossing : crossings) {
    if (crossing.amplitude_v < least_amplitude_v_) continue;
    free_run_until(crossing.at, out);
    if (gone_) flywheel_ticks_ = 0;  // the waveform is back: it gets as long to settle as it had to fade
    gone_ = false;
    seen_ = true;
    const bool early =
        past_count_ > 0 && crossing.at < last_ + (on_flywheel() ? 0.5 - kFlywheelReach : kEarliest) * period_;
    if (!early) take(crossing, out);
  }
  free_run_until(progress, out);
}

void CycleGrid::finish(SamplePosition end, std::vector<GridTick>& out) {
  if (starting_) end_start(out);
  const bool to_the_last = past_count_ > 0 && past_[0].measured;
  const std::size_t before = out.size();
  while (last_ + period_ / 2.0 <= end)
    run_on(out);
  for (std::size_t i = before; i < out.size(); ++i)
    out[i].extended = to_the_last;
}

GridTick CycleGrid::free_running_tick() const {
  GridTick tick{last_, last_rising_};
  tick.period = period_;
  return tick;
}

bool CycleGrid::on_flywheel() const {
  return !starting_ && good_count_ > 0 && flywheel_ticks_ < kFlywheelTicks;
}

void CycleGrid::end_start(std::vector<GridTick>& out) {
  starting_ = false;
  if (held_count_ == 0) {
    past_[0] = {origin_, false, false, 0.0, 0.0};
    past_count_ = 1;
    last_ = origin_;
    out.push_back(free_running_tick());
    return;
  }
  const GridTick& first = held_[0];
  const double half = period_ / 2.0;
  for (auto back = static_cast<int>((first.at - origin_) / half); back > 0; --back) {
    GridTick tick{first.at - back * half, (back % 2 == 0) == first.rising};
    tick.extended = true;
    tick.period = period_;
    out.push_back(tick);
  }
  for (std::size_t i = 0; i < held_count_; ++i) {
    held_[i].period = period_;
    out.push_back(held_[i]);
  }
}

void CycleGrid::free_run_until(SamplePosition limit, std::vector<GridTick>& out) {
  if (starting_) {
    if (limit <= origin_ + kLongestStart * nominal_period_) return;
    end_start(out);
  }
  while (limit > last_ + (on_flywheel() ? 0.5 + kFlywheelReach : kLatest) * period_)
    run_on(out);
}

void CycleGrid::run_on(std::vector<GridTick>& out) {
  last_ += period_ / 2.0;
  last_rising_ = !last_rising_;
  past_[1] = past_[0];
  past_[0] = {last_, false, false, 0.0, 0.0};
  past_count_ = std::min<std::size_t>(past_count_ + 1, 2);
  gone_ = !seen_;
  seen_ = false;
  flywheel_ticks_ = std::min(flywheel_ticks_ + 1, kFlywheelTicks);
  unbroken_ = 0;
  out.push_back(free_running_tick());
}

void CycleGrid::take(const Crossing& crossing, std::vector<GridTick>& out) {
  GridTick tick{crossing.at, crossing.rising, true};
  tick.period = period_;
  Past now{crossing.at, true, false, crossing.amplitude_v, 0.0};
  bool undisturbed = false;
  if (past_count_ == 2 && past_[0].measured && past_[1].measured) {
    now.cycle = crossing.at - past_[1].crossing;
    const double larger = std::max(crossing.amplitude_v, past_[1].amplitude_v);
    const bool same_size = std::abs(crossing.amplitude_v - past_[1].amplitude_v) <= kSteadyAmplitude * larger;
    const bool in_range = std::abs(nominal_period_ - now.cycle) <= kPeriodRange * now.cycle;
    if (past_[0].cycle > 0.0) {
      const double change = std::abs(now.cycle - past_[0].cycle);
      undisturbed = same_size && in_range && change <= kSteadyPeriod * now.cycle;
      tick.jump = change > kJump * now.cycle;
    }
  }
  // The crossing of 16 cycles ago, if all since were measured: a restless supply has no undisturbed cycle,
  // but over that many its period shows all the same.
  const bool long_run = unbroken_ >= recent_.size();
  const SamplePosition long_ago = recent_[next_recent_];
  recent_[next_recent_] = crossing.at;
  next_recent_ = (next_recent_ + 1) % recent_.size();
  ++unbroken_;
  ++restless_;
  if (undisturbed) {
    remember(now.cycle);
    tick.period = period_;
    flywheel_ticks_ = 0;
    restless_ = 0;
  } else if (on_flywheel()) {
    tick.at = last_ + period_ / 2.0;
    now.moved = true;
    ++flywheel_ticks_;
  } else if (long_run && restless_ > recent_.size()) {
    const double mean = (crossing.at - long_ago) / (static_cast<double>(recent_.size()) / 2.0);
    if (std::abs(nominal_period_ - mean) <= kPeriodRange * mean) {
      period_ = mean;
      tick.period = mean;
    }
  }
  tick.steady = undisturbed && !past_[0].moved && !past_[1].moved;
  past_[1] = past_[0];
  past_[0] = now;
  past_count_ = std::min<std::size_t>(past_count_ + 1, 2);
  last_ = tick.at;
  last_rising_ = crossing.rising;
  seen_ = false;
  if (!starting_) {
    out.push_back(tick);
    return;
  }
  held_[held_count_++] = tick;
  if (tick.steady || held_count_ == held_.size()) end_start(out);
}

void CycleGrid::remember(double period) {
  good_[good_count_ % good_.size()] = period;
  ++good_count_;
  const std::size_t n = std::min(good_count_, good_.size());
  double sum = 0.0;
  for (std::size_t i = 0; i < n; ++i)
    sum += good_[i];
  period_ = sum / static_cast<double>(n);
}

}  // namespace tramline::measure
