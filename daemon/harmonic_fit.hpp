#pragma once

#include <complex>
#include <optional>
#include <span>
#include <vector>

namespace tramline {

/// Frequency of the strongest component between 20 and 140 Hz, of a signal sampled `rate_hz` times a second.
///
/// Harmonics, d.c. and noise do not pull it: a scan under a Hann window finds it roughly, the advance of its
/// phase from one half of the samples to the other finds it exactly (their mean, if it drifts). Nothing if
/// there are less than 0.1 s, if the rate is below 300 Hz, or if that component holds less than a tenth of
/// the alternating power: then it is noise, or no mains. Pure.
[[nodiscard]] std::optional<double> fundamental_hz(std::span<const float> volts, double rate_hz);

/// A stretch of a few cycles taken apart into d.c., fundamental, harmonics and the rest.
struct HarmonicFit {
  double dc_v = 0.0;
  /// [h - 1]: order h, peak volts; its angle is that of a cosine at the middle of the stretch.
  std::vector<std::complex<double>> orders;
  std::vector<float> rest;  ///< what is left, sample by sample
  double rest_v = 0.0;      ///< its r.m.s., of as many samples as the fit left free
};

/// Fits `volts` (more samples than 2 * orders + 3), sampled `rate_hz` times a second, by least squares on
/// d.c., on `hz` and its multiples to `orders`, and on a linear change of the fundamental's amplitude and
/// phase, so that a servo at work or a drifting frequency is not taken for noise. Best over whole cycles.
/// Pure.
[[nodiscard]] HarmonicFit fit_harmonics(std::span<const float> volts, double rate_hz, double hz, int orders);

}  // namespace tramline
