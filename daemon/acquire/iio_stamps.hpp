#pragma once

#include <cstddef>
#include <cstdint>
#include <deque>
#include <optional>
#include <span>

namespace tramline::acquire {

/// What the time stamps of a converter's first frames say of its sampling.
struct StampFindings {
  double ns_a_frame = 0.0;
  /// false: many frames share a stamp, or stamps run backwards: they say when frames were fetched, not when
  /// they were sampled, and a lost frame cannot be seen in them.
  bool one_a_frame = false;
};

/// From a few hundred `stamps`, ns, of frames that follow each other. The distance is the median of
/// distances across half of them, which neither late stamps nor a lost frame move.
[[nodiscard]] StampFindings study_stamps(std::span<const std::int64_t> stamps);

/// Finds lost frames by the time stamps of those that came.
///
/// A stamp is late by a latency of interrupts that is never negative and now and then many frames long, so
/// one stamp proves nothing, and neither does one distance of stamps. Frames are lost where stamps *stay*
/// late: the earliest of the `window` stamps from there on, against the earliest of those before, lies at
/// least half a frame later, which is to say that the distance was more than 1.5 frames and no later stamp
/// made up for it. How many are lost is that lateness in frames, rounded. So a frame is judged when `window`
/// more have come. Pure: reads no clock. One thread; memory is bounded.
class StampWatch {
 public:
  /// `missing` frames were lost just before the frame that came as number `before`.
  struct Loss {
    std::int64_t before = 0;
    std::int64_t missing = 0;
  };

  /// `ns_a_frame` must be right to a quarter of a frame in `window` frames.
  StampWatch(double ns_a_frame, std::size_t window) : ns_a_frame_(ns_a_frame), window_(window) {}

  /// The stamps of the next frames that came. Losses found are appended to `losses`.
  void take(std::span<const std::int64_t> stamps, std::deque<Loss>& losses);
  /// No more will come: judges the last `window` frames by what there is.
  void finish(std::deque<Loss>& losses);
  /// Frames judged so far: of these it is known whether any are missing among them.
  [[nodiscard]] std::int64_t judged() const { return judged_; }

 private:
  [[nodiscard]] std::int64_t missing_before_front() const;
  void judge_front(std::deque<Loss>& losses);

  double ns_a_frame_;
  std::size_t window_;
  std::optional<std::int64_t> origin_;
  std::int64_t came_ = 0;
  std::int64_t judged_ = 0;
  std::deque<double> late_;  // of frames not judged yet, ns, against frames of even distance from the first
  double lost_ns_ = 0.0;     // frames lost so far, in time
  // The earliest of the last `window` to twice `window` judged frames: of the stretch before and of this one.
  std::optional<double> earliest_before_;
  std::optional<double> earliest_;
  std::size_t in_stretch_ = 0;
};

}  // namespace tramline::acquire
