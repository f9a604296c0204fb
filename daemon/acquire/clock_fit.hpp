#pragma once

#include <cstdint>
#include <deque>

namespace tramline::acquire {

/// The true sample rate, and when a sample was taken, from many pairs (sample count, time of arrival).
///
/// Frames arrive late by a latency that is never negative and now and then large (the scheduler was busy), so
/// a mean would follow the disturbances. Of each stretch (eight seconds; a quarter of a second at first, then
/// two become one) only the earliest arrival counts, earliest against the line so far; a straight line by
/// least squares goes through those of the last hour, without the stretches whose earliest arrival was itself
/// late (further off the line than three times the median distance). Pure: takes times, reads none. One
/// thread; memory is bounded.
class ClockFit {
 public:
  explicit ClockFit(double nominal_hz);

  /// `samples` samples in all had come by `monotonic_ns`; neither ever goes back.
  void take(std::int64_t samples, std::int64_t monotonic_ns);

  /// Monotonic time at which sample `index` was there, by the line.
  [[nodiscard]] std::int64_t time_of(std::int64_t index) const;
  /// Samples a second by the line; the nominal rate for the first two seconds.
  [[nodiscard]] double rate_hz() const { return 1e9 / ns_a_sample_; }
  /// Whether `rate_hz()` was measured.
  [[nodiscard]] bool measured() const { return measured_; }
  /// Standard uncertainty of the rate, parts per million.
  [[nodiscard]] double rate_error_ppm() const { return rate_error_ppm_; }
  /// How far arrivals of the last stretches lie from the line: a bound on the jitter of `time_of()`.
  [[nodiscard]] std::int64_t spread_ns() const { return spread_ns_; }

 private:
  struct Point {
    std::int64_t samples = 0;
    std::int64_t ns = 0;
    double late_ns = 0.0;  // against the nominal rate, from the first pair: the line is fitted to this
  };
  [[nodiscard]] double off_line(const Point& point) const;
  void join_stretches();
  void fit();

  double nominal_ns_;
  bool begun_ = false;
  std::int64_t first_samples_ = 0;
  std::int64_t first_ns_ = 0;
  std::deque<Point> earliest_;   // of each stretch; the last one is in the making
  std::int64_t stretch_ns_ = 0;  // all have the same length, so that none is earlier for being longer
  std::int64_t stretch_begin_ns_ = 0;
  std::int64_t next_fit_ns_ = 0;
  double ns_a_sample_;
  double offset_ns_ = 0.0;  // of the line at `first_samples_`
  bool measured_ = false;
  double rate_error_ppm_ = 0.0;
  std::int64_t spread_ns_ = 0;
};

}  // namespace tramline::acquire
