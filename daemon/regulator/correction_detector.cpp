#include "daemon/regulator/correction_detector.hpp"

#include <cmath>

namespace tramline::regulator {
namespace {

constexpr int kPairsAMean = 4;
constexpr int kMeansAtRest = 2;
constexpr double kUndeclaredSpeedVoltsPerSecond =
    8.0;                           // slowest usual, standards sheet: large single-phase units
constexpr double kSlowest = 0.25;  // of the declared speed
constexpr double kFastest = 3.0;
constexpr double kUndeclaredFastest = 20.0;
constexpr double kLeastMovement = 0.003;  // of ratio
constexpr std::int64_t kReversalWithinNs = 10 * kNsPerSecond;

}  // namespace

CorrectionDetector::CorrectionDetector(const config::RegulatorSettings& settings, double nominal_v)
    : least_ratio_a_second_(kSlowest * settings.speed_v_per_s.value_or(kUndeclaredSpeedVoltsPerSecond) /
                            nominal_v),
      most_ratio_a_second_(settings.speed_v_per_s
                               ? kFastest * *settings.speed_v_per_s / nominal_v
                               : kUndeclaredFastest * kUndeclaredSpeedVoltsPerSecond / nominal_v) {}

std::optional<storage::Correction> CorrectionDetector::take(const HalfCyclePair& pair) {
  if (std::isnan(pair.ratio)) return restart();
  if (in_mean_ == 0) filling_ = {0.0, 0.0, pair.at, pair.begin, pair.elapsed_ns};
  filling_.ratio += pair.ratio / kPairsAMean;
  filling_.input_v += pair.input_v / kPairsAMean;
  if (++in_mean_ < kPairsAMean) return std::nullopt;
  in_mean_ = 0;
  return take(filling_);
}

std::optional<storage::Correction> CorrectionDetector::take(const Mean& mean) {
  const std::optional<Mean> before = last_;
  last_ = mean;
  if (!before) return std::nullopt;

  const double seconds = static_cast<double>(mean.elapsed_ns - before->elapsed_ns) / 1e9;
  const double change = (mean.ratio - before->ratio) / seconds;
  const double pace = std::abs(change);
  if (pace > most_ratio_a_second_) return end_movement();
  if (pace < least_ratio_a_second_) {
    if (moving_ && ++at_rest_ >= kMeansAtRest) return end_movement();
    return std::nullopt;
  }
  const int direction = change > 0.0 ? 1 : -1;
  std::optional<storage::Correction> ended;
  if (moving_ && direction != direction_) ended = end_movement();
  if (!moving_) {
    moving_ = true;
    direction_ = direction;
    from_ = *before;
  }
  at_rest_ = 0;
  to_ = mean;
  return ended;
}

std::optional<storage::Correction> CorrectionDetector::end_movement() {
  if (!moving_) return std::nullopt;
  moving_ = false;
  at_rest_ = 0;
  const double change = to_.ratio - from_.ratio;
  if (std::abs(change) < kLeastMovement) return std::nullopt;

  storage::Correction correction;
  correction.begin_sample = {std::llround(from_.at)};
  correction.begin = from_.begin;
  correction.end = to_.begin;
  correction.ratio_before = from_.ratio;
  correction.ratio_after = to_.ratio;
  correction.speed_v_per_s =
      std::abs(change) * to_.input_v / (static_cast<double>(to_.elapsed_ns - from_.elapsed_ns) / 1e9);
  reversal_ =
      previous_ && previous_direction_ != direction_ && correction.begin - previous_->end < kReversalWithinNs;
  previous_ = correction;
  previous_direction_ = direction_;
  return correction;
}

std::optional<storage::Correction> CorrectionDetector::restart() {
  in_mean_ = 0;
  last_.reset();
  return end_movement();
}

}  // namespace tramline::regulator
