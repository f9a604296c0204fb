#include "daemon/acquire/grid_model.hpp"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace tramline::acquire {
namespace {

using What = config::ScriptedHappening::What;

// With linear interpolation the error is (2 pi h / 4096)^2 / 8 of a harmonic of order h: 3e-7 of the
// fundamental, 7e-5 of a 15th.
constexpr std::size_t kTable = 4096;
constexpr double kTwoPi = 2.0 * std::numbers::pi;

unsigned bits_of(const std::vector<Phase>& phases) {
  unsigned bits = phases.empty() ? 7U : 0U;
  for (const Phase phase : phases)
    bits |= 1U << static_cast<unsigned>(phase);
  return bits;
}

bool changes_grid(What what) {
  return what == What::sag || what == What::swell || what == What::interruption;
}

}  // namespace

GridModel::GridModel(const config::SimulatorSettings& settings, double nominal_v, double nominal_hz,
                     int phases)
    : rate_hz_(settings.rate_hz),
      voltage_v_(settings.grid.voltage_v > 0.0 ? settings.grid.voltage_v : nominal_v),
      nominal_hz_(nominal_hz),
      phases_(static_cast<std::size_t>(phases)),
      grid_(settings.grid),
      table_(kTable + 1) {
  for (std::size_t i = 0; i <= kTable; ++i) {
    const double angle = kTwoPi * static_cast<double>(i) / kTable;
    double value = std::sin(angle);
    // Odd harmonics at 180 degrees flatten the top, as rectifiers do.
    for (const auto& [order, pct] : grid_.harmonics_pct)
      value += pct / 100.0 * std::sin(order * angle + std::numbers::pi);
    table_[i] = static_cast<float>(std::numbers::sqrt2 * value);
  }
  double power = 1.0;
  for (const auto& [order, pct] : grid_.harmonics_pct)
    power += pct / 100.0 * pct / 100.0;
  form_ = std::sqrt(power);
  for (const auto& happening : settings.script) {
    if (happening.what == What::level) {
      const double full = happening.at_s + happening.ramp_s;
      const double hold = full + happening.lasting_s;
      levels_.push_back(
          {happening.at_s, full, hold, hold + happening.ramp_s, happening.to_v, bits_of(happening.phases)});
    } else if (changes_grid(happening.what)) {
      waiting_.push_back(happening);
    }
  }
  std::stable_sort(waiting_.begin(), waiting_.end(),
                   [](const auto& a, const auto& b) { return a.at_s > b.at_s; });

  Random random(settings.seed);
  double share = 0.0;
  for (std::size_t i = 0; i < voltage_wander_.size(); ++i) {
    // A day, and faster parts down to some minutes.
    static constexpr double kPeriods_s[] = {86400.0, 19000.0, 4700.0, 610.0};
    voltage_wander_[i] = {1.0 / (kPeriods_s[i] * (0.9 + 0.2 * random.unit())), kTwoPi * random.unit(),
                          0.5 + random.unit()};
    share += voltage_wander_[i].share;
  }
  for (Wander& wander : voltage_wander_)
    wander.share /= share;
  share = 0.0;
  for (Wander& wander : frequency_wander_) {
    wander = {1.0 / (60.0 + 1500.0 * random.unit()), kTwoPi * random.unit(), 0.5 + random.unit()};
    share += wander.share;
  }
  for (Wander& wander : frequency_wander_)
    wander.share /= share;
  for (std::size_t p = 0; p < phases_; ++p) {
    noise_.emplace_back(random.next(), grid_.noise_v);
    volts_[p] = levelled_v(wandering_v(0.0), p, 0.0);
  }
}

double GridModel::wandering_v(double t_s) const {
  double sum = 0.0;
  for (const Wander& wander : voltage_wander_)
    sum += wander.share * std::sin(kTwoPi * wander.hz * t_s + wander.phase);
  return voltage_v_ * (1.0 + grid_.wander_pct / 100.0 * sum);
}

double GridModel::levelled_v(double volts, std::size_t phase, double t_s) const {
  for (const Level& level : levels_) {
    if (t_s < level.begin_s || t_s >= level.end_s || (level.phases >> phase & 1U) == 0) continue;
    double there = 1.0;  // how much of the way to the level
    if (t_s < level.full_s) there = (t_s - level.begin_s) / (level.full_s - level.begin_s);
    if (t_s >= level.hold_s) there = 1.0 - (t_s - level.hold_s) / (level.end_s - level.hold_s);
    volts += there * (level.to_v - volts);
  }
  return volts;
}

double GridModel::frequency_hz(double t_s) const {
  double sum = 0.0;
  for (const Wander& wander : frequency_wander_)
    sum += wander.share * std::sin(kTwoPi * wander.hz * t_s + wander.phase);
  return nominal_hz_ + grid_.frequency_drift_hz * sum;
}

void GridModel::place(const config::ScriptedHappening& happening) {
  // The first sample at or after `at_s` at which L1 stands at the angle asked for.
  const double hz = frequency_hz(happening.at_s);
  const double at_frame = happening.at_s * rate_hz_;
  const double cycles_there = cycles_ + (at_frame - static_cast<double>(frame_)) * hz / rate_hz_;
  const double wanted = happening.phase_deg / 360.0;
  const double wait_cycles = std::ceil(cycles_there - wanted - 1e-9) + wanted - cycles_there;
  const auto begin = static_cast<std::int64_t>(std::ceil(at_frame + wait_cycles / hz * rate_hz_ - 1e-6));
  const auto length = std::llround(happening.lasting_s * rate_hz_);
  const double factor = happening.what == What::interruption ? 0.0 : happening.to_pct / 100.0;
  changes_.push_back({begin, begin + length, factor, bits_of(happening.phases)});
}

void GridModel::apply_changes(std::size_t phase, float* volts) const {
  for (const Change& change : changes_) {
    if ((change.phases >> phase & 1U) == 0) continue;
    const std::int64_t from = std::clamp<std::int64_t>(change.begin - frame_, 0, kChunk);
    const std::int64_t to = std::clamp<std::int64_t>(change.end - frame_, 0, kChunk);
    for (std::int64_t i = from; i < to; ++i)
      volts[i] *= static_cast<float>(change.factor);
  }
}

void GridModel::next(const std::array<float*, 3>& volts) {
  const double t_s = static_cast<double>(frame_) / rate_hz_;
  const double end_s = t_s + static_cast<double>(kChunk) / rate_hz_;
  while (!waiting_.empty() && waiting_.back().at_s < end_s) {
    place(waiting_.back());
    waiting_.pop_back();
  }
  std::erase_if(changes_, [this](const Change& change) { return change.end <= frame_; });

  const double step = frequency_hz(t_s) / rate_hz_;
  const double end_v = wandering_v(end_s);
  for (std::size_t p = 0; p < phases_; ++p) {
    const double from_v = volts_[p];
    volts_[p] = levelled_v(end_v, p, end_s);
    const double by_v = (volts_[p] - from_v) / static_cast<double>(kChunk);
    // In table steps, from a whole cycle on so that it is never negative.
    const double offset = cycles_ - std::floor(cycles_) + 1.0 - static_cast<double>(p) / 3.0;
    const auto position = static_cast<float>((offset - std::floor(offset)) * kTable);
    const auto advance = static_cast<float>(step * kTable);
    const auto from = static_cast<float>(from_v);
    const auto by = static_cast<float>(by_v);
    float* out = volts[p];
    for (std::size_t i = 0; i < kChunk; ++i) {
      const float at = position + static_cast<float>(i) * advance;
      const auto whole = static_cast<std::int32_t>(at);
      const float fraction = at - static_cast<float>(whole);
      const float* entry = table_.data() + (static_cast<std::size_t>(whole) & (kTable - 1));
      out[i] = (entry[0] + fraction * (entry[1] - entry[0])) * (from + by * static_cast<float>(i));
    }
    if (!changes_.empty()) apply_changes(p, out);
    noise_[p].add_to(out, kChunk);
  }
  cycles_ += step * static_cast<double>(kChunk);
  if (cycles_ > 1e6) cycles_ -= 1e6;  // keeps the fraction sharp; whole cycles do not matter
  frame_ += static_cast<std::int64_t>(kChunk);
}

}  // namespace tramline::acquire
