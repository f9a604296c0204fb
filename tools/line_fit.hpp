#pragma once

#include <cstddef>
#include <optional>
#include <span>

/// Straight lines through readings, with the standard uncertainties and the correlation of their parameters,
/// in the manner of JCGM 100:2008 (GUM), H.3. Pure arithmetic, free of units, for any thread.
namespace tramline::tools {

/// One reading: `y` was found at `x`.
struct FitPoint {
  double x = 0.0;
  double y = 0.0;
  double u_y = 0.0;  ///< standard uncertainty of y; used by `fit_line_weighted()` alone
};

/// y = intercept + slope · (x - x0).
struct LineFit {
  double x0 = 0.0;
  double intercept = 0.0;
  double slope = 0.0;
  double u_intercept = 0.0;  ///< standard uncertainty
  double u_slope = 0.0;
  double correlation = 0.0;  ///< r(intercept, slope), -1 to 1
  double residual = 0.0;  ///< s, the standard deviation of the residuals (of the weighted: in units of u_y)
  std::size_t degrees_of_freedom = 0;  ///< n - 2

  [[nodiscard]] double at(double x) const { return intercept + slope * (x - x0); }
  /// Standard uncertainty of `at(x)`, with the correlation (H.3.4, equation H.15).
  [[nodiscard]] double u_at(double x) const;
};

/// Ordinary least squares; the uncertainties come from the scatter about the line (type A), so that with two
/// points, which have none, they are NaN. Nothing for fewer than two points, for points all at one x, or for
/// what is not finite.
[[nodiscard]] std::optional<LineFit> fit_line(std::span<const FitPoint> points, double x0 = 0.0);

/// Least squares weighted by 1/u_y²; the uncertainties come from the stated u_y, not from the scatter.
/// Nothing also if a u_y is not positive.
[[nodiscard]] std::optional<LineFit> fit_line_weighted(std::span<const FitPoint> points, double x0 = 0.0);

/// y = slope · x.
struct ProportionFit {
  double slope = 0.0;
  double u_slope = 0.0;                ///< type A; NaN from one point
  double residual = 0.0;               ///< s; NaN from one point
  std::size_t degrees_of_freedom = 0;  ///< n - 1
};

/// Ordinary least squares through zero. Nothing without points, if every x is zero, or for what is not
/// finite.
[[nodiscard]] std::optional<ProportionFit> fit_proportion(std::span<const FitPoint> points);

}  // namespace tramline::tools
