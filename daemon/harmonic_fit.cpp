#include "daemon/harmonic_fit.hpp"

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <numbers>

namespace tramline {
namespace {

using Phasor = std::complex<double>;
using std::numbers::pi;

constexpr double kLowestHz = 20.0;
constexpr double kHighestHz = 140.0;
constexpr double kShortestS = 0.1;
constexpr double kScanS = 1.0;
constexpr double kScanRateHz = 2000.0;
constexpr double kLeastShare = 0.1;  // of the alternating power

/// Peak phasor of the component at `hz` under a Hann window; its angle is counted from `origin` (in samples).
Phasor under_hann(std::span<const float> volts, double mean, double rate_hz, double hz, double origin) {
  const double step = 2.0 * pi * hz / rate_hz;
  const Phasor turn = std::polar(1.0, -step);
  const auto n = static_cast<double>(volts.size());
  const Phasor window_turn = std::polar(1.0, 2.0 * pi / n);
  Phasor at = std::polar(1.0, step * origin);
  Phasor window = std::polar(1.0, pi / n);
  double re = 0.0;
  double im = 0.0;
  for (const float v : volts) {
    const double weighted = (static_cast<double>(v) - mean) * (1.0 - window.real());
    re += weighted * at.real();
    im += weighted * at.imag();
    at *= turn;
    window *= window_turn;
  }
  return Phasor(re, im) * (2.0 / n);
}

double mean_of(std::span<const float> volts) {
  double sum = 0.0;
  for (const float v : volts)
    sum += static_cast<double>(v);
  return sum / static_cast<double>(volts.size());
}

double variance_of(std::span<const float> volts, double mean) {
  double sum = 0.0;
  for (const float v : volts)
    sum += (static_cast<double>(v) - mean) * (static_cast<double>(v) - mean);
  return sum / static_cast<double>(volts.size());
}

/// Means of `by` neighbours.
std::vector<float> thinned(std::span<const float> volts, std::size_t by) {
  std::vector<float> out(volts.size() / by);
  for (std::size_t i = 0; i < out.size(); ++i)
    out[i] = static_cast<float>(mean_of(volts.subspan(i * by, by)));
  return out;
}

double scanned_hz(std::span<const float> volts, double rate_hz) {
  const double mean = mean_of(volts);
  const double step_hz = 0.5 * rate_hz / static_cast<double>(volts.size());
  double best_hz = kLowestHz;
  double best = 0.0;
  for (double hz = kLowestHz; hz <= kHighestHz; hz += step_hz) {
    const double size = std::norm(under_hann(volts, mean, rate_hz, hz, 0.0));
    if (size <= best) continue;
    best = size;
    best_hz = hz;
  }
  return best_hz;
}

/// `hz`, made exact by the advance of the phase from the first half to the second.
double refined_hz(std::span<const float> volts, double rate_hz, double hz) {
  const std::size_t half = volts.size() / 2;
  const double mean = mean_of(volts);
  for (int pass = 0; pass < 2; ++pass) {
    const Phasor first = under_hann(volts.first(half), mean, rate_hz, hz, 0.0);
    const Phasor second =
        under_hann(volts.subspan(half, half), mean, rate_hz, hz, -static_cast<double>(half));
    hz += std::arg(second * std::conj(first)) / (2.0 * pi) * rate_hz / static_cast<double>(half);
  }
  return hz;
}

}  // namespace

std::optional<double> fundamental_hz(std::span<const float> volts, double rate_hz) {
  if (static_cast<double>(volts.size()) < kShortestS * rate_hz || rate_hz < 2.0 * kHighestHz + 20.0)
    return std::nullopt;
  const auto part = volts.first(std::min(volts.size(), static_cast<std::size_t>(kScanS * rate_hz)));
  const auto by = static_cast<std::size_t>(std::max(1.0, std::floor(rate_hz / kScanRateHz)));
  double hz = scanned_hz(thinned(part, by), rate_hz / static_cast<double>(by));
  hz = refined_hz(part, rate_hz, hz);
  hz = refined_hz(volts, rate_hz, hz);
  const double mean = mean_of(volts);
  const double power = std::norm(under_hann(volts, mean, rate_hz, hz, 0.0)) / 2.0;
  if (!(hz >= kLowestHz && hz <= kHighestHz) || !(power > kLeastShare * variance_of(volts, mean)))
    return std::nullopt;
  return hz;
}

HarmonicFit fit_harmonics(std::span<const float> volts, double rate_hz, double hz, int orders) {
  const std::size_t n = volts.size();
  const auto count = static_cast<double>(n);
  const double step = 2.0 * pi * hz / rate_hz;
  const double middle = (count - 1.0) / 2.0;
  // The basis, planar so that it vectorises: cosine and sine of the fundamental, then of each order in turn.
  std::vector<double> cos1(n), sin1(n), cos_h(n), sin_h(n), left(n);
  for (std::size_t i = 0; i < n; ++i) {
    const double angle = step * (static_cast<double>(i) - middle);
    cos1[i] = std::cos(angle);
    sin1[i] = std::sin(angle);
    left[i] = static_cast<double>(volts[i]);
  }
  const auto ramp = [&](std::size_t i) { return (static_cast<double>(i) - middle) / middle; };
  double ramp_squares = 0.0;
  for (std::size_t i = 0; i < n; ++i)
    ramp_squares += ramp(i) * ramp(i);

  // Over whole cycles the basis is all but orthogonal, so taking out one after the other converges at once.
  constexpr int kPasses = 5;
  HarmonicFit fit;
  fit.orders.assign(static_cast<std::size_t>(orders), Phasor(0.0, 0.0));
  for (int pass = 0; pass < kPasses; ++pass) {
    double sum = 0.0;
    for (std::size_t i = 0; i < n; ++i)
      sum += left[i];
    const double dc = sum / count;
    fit.dc_v += dc;
    for (std::size_t i = 0; i < n; ++i)
      left[i] -= dc;

    cos_h = cos1;
    sin_h = sin1;
    for (Phasor& order : fit.orders) {
      double re = 0.0;
      double im = 0.0;
      for (std::size_t i = 0; i < n; ++i) {
        re += left[i] * cos_h[i];
        im -= left[i] * sin_h[i];
      }
      re *= 2.0 / count;
      im *= 2.0 / count;
      order += Phasor(re, im);
      for (std::size_t i = 0; i < n; ++i) {
        left[i] -= re * cos_h[i] - im * sin_h[i];
        const double c = cos_h[i] * cos1[i] - sin_h[i] * sin1[i];
        sin_h[i] = sin_h[i] * cos1[i] + cos_h[i] * sin1[i];
        cos_h[i] = c;
      }
    }

    double re = 0.0;
    double im = 0.0;
    for (std::size_t i = 0; i < n; ++i) {
      re += ramp(i) * left[i] * cos1[i];
      im -= ramp(i) * left[i] * sin1[i];
    }
    re *= 2.0 / ramp_squares;
    im *= 2.0 / ramp_squares;
    for (std::size_t i = 0; i < n; ++i)
      left[i] -= ramp(i) * (re * cos1[i] - im * sin1[i]);
  }

  double squares = 0.0;
  fit.rest.resize(n);
  for (std::size_t i = 0; i < n; ++i) {
    squares += left[i] * left[i];
    fit.rest[i] = static_cast<float>(left[i]);
  }
  const double free = count - 3.0 - 2.0 * static_cast<double>(orders);
  fit.rest_v = std::sqrt(squares / std::max(1.0, free));
  return fit;
}

}  // namespace tramline
