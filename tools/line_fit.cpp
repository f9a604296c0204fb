#include "tools/line_fit.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace tramline::tools {
namespace {

constexpr double kUnknown = std::numeric_limits<double>::quiet_NaN();

/// About the mean of x the sums do not cancel, and intercept and slope are uncorrelated.
template <class Weight>
std::optional<LineFit> fit(std::span<const FitPoint> points, double x0, Weight weight_of) {
  if (points.size() < 2 || !std::isfinite(x0)) return std::nullopt;
  double sum_w = 0.0;
  double mean_x = 0.0;
  double mean_y = 0.0;
  for (const FitPoint& p : points) {
    const double w = weight_of(p);
    if (!std::isfinite(p.x) || !std::isfinite(p.y) || !std::isfinite(w) || !(w > 0.0)) return std::nullopt;
    sum_w += w;
    mean_x += w * p.x;
    mean_y += w * p.y;
  }
  mean_x /= sum_w;
  mean_y /= sum_w;
  const auto [lowest, highest] = std::minmax_element(
      points.begin(), points.end(), [](const FitPoint& a, const FitPoint& b) { return a.x < b.x; });
  if (!(highest->x > lowest->x)) return std::nullopt;
  double sxx = 0.0;
  double sxy = 0.0;
  for (const FitPoint& p : points) {
    sxx += weight_of(p) * (p.x - mean_x) * (p.x - mean_x);
    sxy += weight_of(p) * (p.x - mean_x) * (p.y - mean_y);
  }
  LineFit line;
  line.x0 = x0;
  line.slope = sxy / sxx;
  line.intercept = mean_y + line.slope * (x0 - mean_x);
  if (!std::isfinite(line.slope) || !std::isfinite(line.intercept)) return std::nullopt;
  line.degrees_of_freedom = points.size() - 2;
  double squares = 0.0;
  for (const FitPoint& p : points) {
    const double residual = p.y - line.at(p.x);
    squares += weight_of(p) * residual * residual;
  }
  line.residual = line.degrees_of_freedom > 0
                      ? std::sqrt(squares / static_cast<double>(line.degrees_of_freedom))
                      : kUnknown;
  // For a variance of one of each weighted y.
  line.u_slope = std::sqrt(1.0 / sxx);
  line.u_intercept = std::hypot(std::sqrt(1.0 / sum_w), (x0 - mean_x) * line.u_slope);
  line.correlation = (x0 - mean_x) * line.u_slope / line.u_intercept;
  return line;
}

}  // namespace

double LineFit::u_at(double x) const {
  const double lever = x - x0;
  const double square = u_intercept * u_intercept + lever * lever * u_slope * u_slope +
                        2.0 * lever * u_intercept * u_slope * correlation;
  return std::isnan(square) ? kUnknown : std::sqrt(std::max(0.0, square));
}

std::optional<LineFit> fit_line(std::span<const FitPoint> points, double x0) {
  auto line = fit(points, x0, [](const FitPoint&) { return 1.0; });
  if (line) {
    line->u_intercept *= line->residual;
    line->u_slope *= line->residual;
  }
  return line;
}

std::optional<LineFit> fit_line_weighted(std::span<const FitPoint> points, double x0) {
  const bool all_known =
      std::all_of(points.begin(), points.end(), [](const FitPoint& p) { return p.u_y > 0.0; });
  if (!all_known) return std::nullopt;
  return fit(points, x0, [](const FitPoint& p) { return 1.0 / (p.u_y * p.u_y); });
}

std::optional<ProportionFit> fit_proportion(std::span<const FitPoint> points) {
  double sxx = 0.0;
  double sxy = 0.0;
  for (const FitPoint& p : points) {
    sxx += p.x * p.x;
    sxy += p.x * p.y;
  }
  if (!(sxx > 0.0) || !std::isfinite(sxx) || !std::isfinite(sxy)) return std::nullopt;
  ProportionFit fit;
  fit.slope = sxy / sxx;
  fit.degrees_of_freedom = points.size() - 1;
  double squares = 0.0;
  for (const FitPoint& p : points) {
    const double residual = p.y - fit.slope * p.x;
    squares += residual * residual;
  }
  const bool scatters = fit.degrees_of_freedom > 0;
  fit.residual = scatters ? std::sqrt(squares / static_cast<double>(fit.degrees_of_freedom)) : kUnknown;
  fit.u_slope = fit.residual / std::sqrt(sxx);
  return fit;
}

}  // namespace tramline::tools
