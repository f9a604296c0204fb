#include "daemon/regulator/band_keeping.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace tramline::regulator {
namespace {

constexpr std::int64_t kTenMinutesNs = 600 * kNsPerSecond;
constexpr std::int64_t kFullNs = kTenMinutesNs - kNsPerSecond;  // half cycles do not fall on the tick

}  // namespace

BandKeeping::BandKeeping(Phase phase, const config::Site& site)
    : phase_(phase),
      band_(site.band()),
      correctable_low_v_(site.regulator ? band_.low_v / site.regulator->ratio_max : band_.low_v),
      correctable_high_v_(site.regulator ? band_.high_v / site.regulator->ratio_min : band_.high_v) {}

std::optional<storage::RegulatorInterval> BandKeeping::take(const measure::HalfCycle& half_cycle) {
  std::optional<storage::RegulatorInterval> ended;
  const std::int64_t ns = half_cycle.begin.value;
  const std::int64_t number = ns / kTenMinutesNs - (ns % kTenMinutesNs < 0 ? 1 : 0);
  if (number_ != number) {
    ended = close();
    number_ = number;
    counts_ = {};
    counts_.phase = phase_;
    counts_.begin = {number * kTenMinutesNs};
    counts_.end = counts_.begin + kTenMinutesNs;
    ratio_sum_ = speed_sum_ = 0.0;
    input_ns_ = output_ns_ = 0;
  }
  const double volts = half_cycle.value.u_rms_v;
  const bool in_band = band_.holds(volts);
  if (half_cycle.channel.side == Side::input) {
    ++counts_.input_half_cycles;
    counts_.input_in_band += in_band ? 1 : 0;
    input_ns_ += half_cycle.window_ns / 2;
  } else {
    ++counts_.output_half_cycles;
    counts_.output_in_band += in_band ? 1 : 0;
    counts_.output_low += volts < band_.low_v ? 1 : 0;
    counts_.output_high += volts > band_.high_v ? 1 : 0;
    output_ns_ += half_cycle.window_ns / 2;
  }
  return ended;
}

void BandKeeping::take(const HalfCyclePair& pair) {
  if (std::isnan(pair.ratio)) return;
  ++counts_.pairs;
  counts_.correctable += pair.input_v >= correctable_low_v_ && pair.input_v <= correctable_high_v_ ? 1 : 0;
  counts_.ratio_min = std::fmin(counts_.ratio_min, pair.ratio);
  counts_.ratio_max = std::fmax(counts_.ratio_max, pair.ratio);
  ratio_sum_ += pair.ratio;
}

void BandKeeping::take(const storage::Correction& correction, bool reversal) {
  ++counts_.corrections;
  counts_.reversals += reversal ? 1 : 0;
  counts_.travel += std::abs(correction.ratio_after - correction.ratio_before);
  speed_sum_ += correction.speed_v_per_s;
}

std::optional<storage::RegulatorInterval> BandKeeping::close() {
  if (!number_) return std::nullopt;
  number_.reset();
  return finished();
}

storage::RegulatorInterval BandKeeping::finished() const {
  storage::RegulatorInterval interval = counts_;
  if (interval.pairs > 0) interval.ratio_mean = ratio_sum_ / static_cast<double>(interval.pairs);
  if (interval.corrections > 0) interval.speed_v_per_s = speed_sum_ / interval.corrections;
  interval.partial = std::max(input_ns_, output_ns_) < kFullNs;
  return interval;
}

}  // namespace tramline::regulator
