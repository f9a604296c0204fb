#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <span>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/source.hpp"
#include "daemon/measure/block.hpp"

/// What an installer's probe measures, before anyone trusts the site: figures only; what they mean is said by
/// probe_findings.hpp. Pure: no clock, no I/O.
namespace tramline {

/// The waveform of a channel, where one of mains frequency was found.
struct WaveFigures {
  double hz = 0.0;
  double fundamental_v = 0.0;  ///< r.m.s.
  double thd_pct = 0.0;        ///< of the fundamental, orders 2 to `highest_order` (THD of IEC 61000-4-7)
  int highest_order = 0;       ///< 40, or what the sample rate reaches
  double second_pct = 0.0;     ///< second harmonic, of the fundamental
  /// R.m.s. of what is left without d.c., fundamental and those harmonics; median of stretches of about
  /// 0.2 s. Interharmonics and harmonics above `highest_order` are in it.
  double noise_v = 0.0;
};

/// Samples that stand, several together and again and again, at the very extreme of a waveform which goes
/// there steeply: a limit, whether somebody declared it or not.
struct LimitFigures {
  double at_v = 0.0;
  std::int64_t runs = 0;
  std::int64_t longest = 0;  ///< samples
};

struct ChannelFigures {
  Channel channel;
  double rms_v = 0.0;  ///< with d.c.; of r.m.s. readings, the root of their mean square
  double dc_v = 0.0;
  double peak_v = 0.0;  ///< largest |volts|
  double crest = 0.0;   ///< peak over r.m.s.; 0 without voltage
  std::optional<WaveFigures> wave;
  /// Of the fundamental against that of the first channel that has one, -180 to 180; positive: leads.
  std::optional<double> angle_deg;
  std::int64_t over_range_spans = 0;
  std::int64_t over_range_frames = 0;
  std::optional<LimitFigures> upper_limit;
  std::optional<LimitFigures> lower_limit;
  bool constant = false;  ///< the same number in every sample
  double step_v = 0.0;  ///< smallest difference of two values that came: the converter's step, or a multiple
};

/// Input and output of one phase.
struct PairFigures {
  std::size_t input = 0;  ///< index into `channels`
  std::size_t output = 0;
  double ratio = 0.0;  ///< U_out / U_in, r.m.s.; 0 without input
  /// Of the output's fundamental against the input's, -180 to 180; positive: it leads.
  std::optional<double> skew_deg;
  std::optional<double> skew_us;
  std::optional<double> noise_correlation;  ///< of what is left of both, -1 to 1
  bool identical = false;                   ///< the same number in every sample of both
};

struct MissingFigures {
  std::int64_t gaps = 0;
  std::int64_t frames = 0;
  measure::GapCause longest_cause = measure::GapCause::none;
  std::int64_t longest = 0;
};

struct RateFigures {
  double nominal_hz = 0.0;
  std::optional<double> measured_hz;  ///< of a live source only
  double error_ppm = 0.0;             ///< bound on its error
};

struct ProbeFigures {
  bool readings = false;  ///< r.m.s. readings of a polled meter: only r.m.s. figures were measured
  double seconds = 0.0;   ///< of samples that came
  std::int64_t frames = 0;
  double longest_stretch_s = 0.0;  ///< without a gap: what the waveform figures were taken from
  std::vector<ChannelFigures> channels;
  std::vector<PairFigures> pairs;
  MissingFigures missing;
  RateFigures rate;
  std::int64_t refused_bytes = 0;
};

/// Collects blocks, then takes the figures. However the samples are cut into blocks, the figures are the
/// same, but for the sample rate where only arrivals tell of it.
class Probe {
 public:
  Probe(std::span<const config::ChannelSettings> channels, const acquire::StreamInfo& info);

  /// Takes a block (of 0 frames too) that was there at `at_s`, seconds on any steady clock.
  void take(const measure::Block& block, double at_s);

  /// Seconds of samples so far, missing ones counted.
  [[nodiscard]] double seconds() const;
  /// As much as fits into its memory (about 100 MB) has come.
  [[nodiscard]] bool full() const;

  /// `health`: the source's own word at the end.
  [[nodiscard]] ProbeFigures figures(const acquire::StreamHealth& health) const;

 private:
  struct Stretch {
    std::size_t begin;
    std::size_t end;
  };
  [[nodiscard]] Stretch longest() const;
  [[nodiscard]] RateFigures rate(const acquire::StreamHealth& health) const;

  std::vector<Channel> channels_;
  double rate_hz_;
  double readings_every_s_;
  bool live_;
  std::vector<std::vector<float>> volts_;
  std::vector<std::vector<bool>> over_range_;
  std::vector<Stretch> stretches_;
  MissingFigures missing_;
  std::int64_t first_ = 0;
  std::int64_t next_ = 0;
  std::int64_t first_end_ = 0;  // of the first block
  double first_at_s_ = 0.0;
  double last_at_s_ = 0.0;
  std::optional<double> anchored_hz_;
};

}  // namespace tramline
