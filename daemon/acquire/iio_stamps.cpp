#include "daemon/acquire/iio_stamps.hpp"

#include <algorithm>
#include <cmath>
#include <vector>

namespace tramline::acquire {

StampFindings study_stamps(std::span<const std::int64_t> stamps) {
  if (stamps.size() < 4) return {};
  std::size_t advancing = 0;
  for (std::size_t i = 1; i < stamps.size(); ++i)
    advancing += stamps[i] > stamps[i - 1] ? 1 : 0;
  const std::size_t half = stamps.size() / 2;
  std::vector<double> across;
  for (std::size_t i = 0; i + half < stamps.size(); ++i)
    across.push_back(static_cast<double>(stamps[i + half]) - static_cast<double>(stamps[i]));
  const auto middle = across.begin() + static_cast<std::ptrdiff_t>(across.size() / 2);
  std::nth_element(across.begin(), middle, across.end());
  StampFindings findings;
  findings.ns_a_frame = *middle / static_cast<double>(half);
  findings.one_a_frame = findings.ns_a_frame > 0.0 && 10 * advancing >= 9 * (stamps.size() - 1);
  return findings;
}

void StampWatch::take(std::span<const std::int64_t> stamps, std::deque<Loss>& losses) {
  for (const std::int64_t stamp : stamps) {
    if (!origin_) origin_ = stamp;
    // Unsigned: the server at the other end may send any bits.
    const auto since =
        static_cast<std::int64_t>(static_cast<std::uint64_t>(stamp) - static_cast<std::uint64_t>(*origin_));
    late_.push_back(static_cast<double>(since) - static_cast<double>(came_) * ns_a_frame_);
    ++came_;
    if (late_.size() > window_) judge_front(losses);
  }
}

void StampWatch::finish(std::deque<Loss>& losses) {
  while (!late_.empty())
    judge_front(losses);
}

std::int64_t StampWatch::missing_before_front() const {
  if (!earliest_ && !earliest_before_) return 0;
  const double earliest = std::min(earliest_.value_or(INFINITY), earliest_before_.value_or(INFINITY));
  const double enough = earliest + 0.5 * ns_a_frame_;
  const double front = late_.front() - lost_ns_;
  if (front <= enough) return 0;
  double earliest_after = INFINITY;
  for (std::size_t i = 1; i < late_.size(); ++i) {
    const double late = late_[i] - lost_ns_;
    if (late <= enough) return 0;
    earliest_after = std::min(earliest_after, late);
  }
  // A stamp is never early: this one is late, and the loss comes after it.
  if (front < earliest_after - 0.25 * ns_a_frame_ && late_.size() > 1) return 0;
  earliest_after = std::min(earliest_after, front);
  return std::llround((earliest_after - earliest) / ns_a_frame_);
}

void StampWatch::judge_front(std::deque<Loss>& losses) {
  if (const std::int64_t missing = missing_before_front(); missing > 0) {
    losses.push_back({judged_, missing});
    lost_ns_ += static_cast<double>(missing) * ns_a_frame_;
  }
  const double late = late_.front() - lost_ns_;
  late_.pop_front();
  ++judged_;
  earliest_ = earliest_ ? std::min(*earliest_, late) : late;
  if (++in_stretch_ == window_) {
    earliest_before_ = earliest_;
    earliest_.reset();
    in_stretch_ = 0;
  }
}

}  // namespace tramline::acquire
