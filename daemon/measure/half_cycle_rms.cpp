#include "daemon/measure/half_cycle_rms.hpp"

#include <algorithm>
#include <cmath>

namespace tramline::measure {

HalfCycleRms::HalfCycleRms(double rate_hz, double nominal_hz, double nominal_v, std::size_t keep,
                           std::size_t most_at_once)
    : history_(std::max(keep, static_cast<std::size_t>(6.0 * rate_hz / nominal_hz) + most_at_once),
               most_at_once, samples_per_row(rate_hz, nominal_hz)),
      fundamental_(rate_hz, nominal_hz, history_.samples_a_row(),
                   most_at_once / history_.samples_a_row() + 2),
      grid_(rate_hz / nominal_hz, nominal_v) {}

void HalfCycleRms::restart(SampleIndex first) {
  history_.restart(first);
  fundamental_.restart(first.value);
  grid_.restart(static_cast<double>(first.value));
  edge_count_ = 0;
}

void HalfCycleRms::over_range(std::int64_t from, std::int64_t to) {
  if (!limits_.empty() && limits_.back().to >= from) {
    limits_.back().to = std::max(limits_.back().to, to);
  } else {
    limits_.push_back({from, to});
  }
}

bool HalfCycleRms::touches_over_range(SamplePosition from, SamplePosition to) const {
  return std::any_of(limits_.begin(), limits_.end(), [&](const Limit& limit) {
    return static_cast<double>(limit.from)<to&& static_cast<double>(limit.to)> from;
  });
}

void HalfCycleRms::feed(std::span<const float> volts, std::vector<HalfCycleValue>& values,
                        std::vector<GridTick>& ticks) {
  while (!limits_.empty() && limits_.front().to < history_.samples().begin())
    limits_.pop_front();
  history_.append(volts);
  crossings_.clear();
  fundamental_.follow(history_, crossings_);
  const std::size_t before = ticks.size();
  grid_.follow(crossings_, fundamental_.progress(), ticks);
  for (std::size_t i = before; i < ticks.size(); ++i)
    value_at(ticks[i], values);
}

void HalfCycleRms::finish(std::vector<HalfCycleValue>& values, std::vector<GridTick>& ticks) {
  const std::size_t before = ticks.size();
  grid_.finish(static_cast<double>(history_.samples().end() - 1), ticks);
  for (std::size_t i = before; i < ticks.size(); ++i)
    value_at(ticks[i], values);
}

void HalfCycleRms::value_at(const GridTick& tick, std::vector<HalfCycleValue>& values) {
  const Edge edge{tick, history_.head(tick.at), history_.row_of(tick.at), 0.0};
  if (edge_count_ > 0) {
    Edge& last = edges_[1];
    last.half_energy = history_.rows_energy(last.row, edge.row) + edge.head - last.head;
  }
  if (edge_count_ == 2) add_value(edges_[0], tick, values);
  edges_[0] = edges_[1];
  edges_[1] = edge;
  edge_count_ = std::min<std::size_t>(edge_count_ + 1, 2);
}

void HalfCycleRms::add_value(const Edge& from, const GridTick& tick,
                             std::vector<HalfCycleValue>& values) const {
  HalfCycleValue value;
  value.begin = from.tick.at;
  double energy = 0.0;
  if (tick.steady) {
    value.end = tick.at;
    energy = from.half_energy + edges_[1].half_energy;
  } else {
    value.end = value.begin + tick.period;
    if (value.end > static_cast<double>(history_.samples().end())) return;
    energy =
        history_.rows_energy(from.row, history_.row_of(value.end)) + history_.head(value.end) - from.head;
  }
  value.u_rms_v = std::sqrt(std::max(0.0, energy / (value.end - value.begin)));
  value.free_running = !from.tick.measured;
  value.over_range = !limits_.empty() && touches_over_range(value.begin, value.end);
  values.push_back(value);
}

}  // namespace tramline::measure
