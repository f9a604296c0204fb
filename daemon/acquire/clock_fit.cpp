#include "daemon/acquire/clock_fit.hpp"

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <vector>

namespace tramline::acquire {
namespace {

constexpr std::int64_t kSecond = 1'000'000'000;
constexpr std::int64_t kShortestStretchNs = kSecond / 4;
constexpr std::int64_t kLongestStretchNs = 8 * kSecond;
constexpr std::size_t kMostStretches = 450;      // an hour of the longest
constexpr std::size_t kMostShortStretches = 32;  // then two become one
constexpr double kLateStretch = 3.0;             // times the median distance from the line

double median(std::vector<double>& values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

}  // namespace

ClockFit::ClockFit(double nominal_hz) : nominal_ns_(1e9 / nominal_hz), ns_a_sample_(nominal_ns_) {}

double ClockFit::off_line(const Point& point) const {
  return point.late_ns - offset_ns_ -
         (ns_a_sample_ - nominal_ns_) * static_cast<double>(point.samples - first_samples_);
}

void ClockFit::take(std::int64_t samples, std::int64_t monotonic_ns) {
  if (!begun_) {
    begun_ = true;
    first_samples_ = samples;
    first_ns_ = monotonic_ns;
    stretch_ns_ = kShortestStretchNs;
    stretch_begin_ns_ = monotonic_ns;
    next_fit_ns_ = monotonic_ns + kSecond;
  }
  Point point{samples, monotonic_ns, 0.0};
  point.late_ns = static_cast<double>(monotonic_ns - first_ns_) -
                  nominal_ns_ * static_cast<double>(samples - first_samples_);
  if (earliest_.empty() || monotonic_ns - stretch_begin_ns_ >= stretch_ns_) {
    if (earliest_.size() >= kMostShortStretches && stretch_ns_ < kLongestStretchNs) join_stretches();
    stretch_begin_ns_ = monotonic_ns;
    earliest_.push_back(point);
    if (earliest_.size() > kMostStretches) earliest_.pop_front();
  } else if (off_line(point) < off_line(earliest_.back())) {
    earliest_.back() = point;
  }
  if (!measured_ && earliest_.size() == 1) offset_ns_ = earliest_.front().late_ns;
  if (monotonic_ns >= next_fit_ns_) {
    fit();
    next_fit_ns_ = monotonic_ns + std::clamp((monotonic_ns - first_ns_) / 4, kSecond / 2, 10 * kSecond);
  }
}

void ClockFit::join_stretches() {
  for (std::size_t i = 0; i + 1 < earliest_.size(); i += 2) {
    const Point& one = earliest_[i];
    const Point& other = earliest_[i + 1];
    earliest_[i / 2] = off_line(other) < off_line(one) ? other : one;
  }
  earliest_.resize(earliest_.size() / 2);
  stretch_ns_ *= 2;
}

void ClockFit::fit() {
  // The last stretch is in the making: its earliest arrival is not yet as early as those of the others.
  const std::size_t whole = earliest_.size() - 1;
  if (whole < 4) return;
  std::vector<double> distances;
  double limit_ns = INFINITY;
  double mean_distance = 0.0;
  // First with all stretches, then without those that stand out.
  for (int round = 0; round < 3; ++round) {
    double n = 0.0;
    double mean_x = 0.0;
    double mean_y = 0.0;
    const auto counts = [&](const Point& point) {
      return round == 0 || std::abs(off_line(point) - mean_distance) <= limit_ns;
    };
    std::vector<const Point*> kept;
    for (std::size_t i = 0; i < whole; ++i) {
      const Point& point = earliest_[i];
      if (!counts(point)) continue;
      kept.push_back(&point);
      n += 1.0;
      mean_x += static_cast<double>(point.samples - first_samples_);
      mean_y += point.late_ns;
    }
    if (kept.size() < 3) break;
    mean_x /= n;
    mean_y /= n;
    double xx = 0.0;
    double xy = 0.0;
    for (const Point* point : kept) {
      const double x = static_cast<double>(point->samples - first_samples_) - mean_x;
      xx += x * x;
      xy += x * (point->late_ns - mean_y);
    }
    if (!(xx > 0.0)) return;
    const double slope = xy / xx;
    ns_a_sample_ = nominal_ns_ + slope;
    offset_ns_ = mean_y - slope * mean_x;
    double squares = 0.0;
    for (const Point* point : kept) {
      const double off = off_line(*point);
      squares += off * off;
    }
    rate_error_ppm_ = std::sqrt(squares / std::max(1.0, n - 2.0) / xx) / ns_a_sample_ * 1e6;

    distances.clear();
    for (std::size_t i = 0; i < whole; ++i)
      distances.push_back(off_line(earliest_[i]));
    mean_distance = median(distances);
    for (double& distance : distances)
      distance = std::abs(distance - mean_distance);
    limit_ns = std::max(kLateStretch * median(distances), 1000.0);
  }
  measured_ = true;
  double furthest = 0.0;
  for (std::size_t i = whole - std::min<std::size_t>(whole, 12); i < whole; ++i)
    furthest = std::max(furthest, std::abs(off_line(earliest_[i])));
  spread_ns_ = std::llround(furthest);
}

std::int64_t ClockFit::time_of(std::int64_t index) const {
  return first_ns_ + std::llround(offset_ns_ + ns_a_sample_ * static_cast<double>(index - first_samples_));
}

}  // namespace tramline::acquire
