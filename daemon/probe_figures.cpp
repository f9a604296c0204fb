#include "daemon/probe_figures.hpp"

#include <algorithm>
#include <cmath>
#include <complex>
#include <limits>
#include <numbers>

#include "daemon/harmonic_fit.hpp"

namespace tramline {
namespace {

using Phasor = std::complex<double>;

constexpr std::size_t kMostValues = 24'000'000;
constexpr double kFitS = 0.2;                 // as the 10/12-cycle window of IEC 61000-4-30
constexpr std::size_t kMostFitted = 400'000;  // samples of a channel, spread over the stretch
constexpr int kHighestOrder = 40;             // to which EN 50160 takes THD
constexpr double kSameFrequencyHz = 0.05;     // or they are not one supply
constexpr double kArrivalJitterS = 0.05;      // a block, and the scheduler
constexpr std::int64_t kRunsOfLimit = 3;
constexpr std::int64_t kSamplesOfLimit = 3;
// A rounded crest stands still for as long as it stays within one step of the converter, and leaves it by a
// step. A limit is left steeply.
constexpr double kStepsAtEdge = 2.5;

double root_mean_square(std::span<const float> volts) {
  double squares = 0.0;
  for (const float v : volts)
    squares += static_cast<double>(v) * static_cast<double>(v);
  return volts.empty() ? 0.0 : std::sqrt(squares / static_cast<double>(volts.size()));
}

double mean(std::span<const float> volts) {
  double sum = 0.0;
  for (const float v : volts)
    sum += static_cast<double>(v);
  return volts.empty() ? 0.0 : sum / static_cast<double>(volts.size());
}

double median(std::vector<double> values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

double degrees(const Phasor& phasor) {
  return std::arg(phasor) * 180.0 / std::numbers::pi;
}

/// Smallest difference of two values that came: a converter's step, if it has one worth the name.
double smallest_step(std::span<const float> volts) {
  std::vector<float> sorted(volts.begin(), volts.end());
  std::sort(sorted.begin(), sorted.end());
  float least = std::numeric_limits<float>::infinity();
  for (std::size_t i = 1; i < sorted.size(); ++i) {
    const float step = sorted[i] - sorted[i - 1];
    if (step > 0.0F) least = std::min(least, step);
  }
  return std::isinf(least) ? 0.0 : static_cast<double>(least);
}

/// The limit at `extreme`, if there is one.
std::optional<LimitFigures> limit_at(float extreme, std::span<const float> volts, double step_v) {
  LimitFigures limit{static_cast<double>(extreme), 0, 0};
  double edges = 0.0;
  for (std::size_t i = 1; i < volts.size(); ++i) {
    if (volts[i] != extreme || volts[i - 1] == extreme) continue;
    std::size_t end = i;
    while (end < volts.size() && volts[end] == extreme)
      ++end;
    const auto length = static_cast<std::int64_t>(end - i);
    if (length >= kSamplesOfLimit && end < volts.size()) {
      ++limit.runs;
      limit.longest = std::max(limit.longest, length);
      edges +=
          static_cast<double>(std::min(std::abs(extreme - volts[i - 1]), std::abs(extreme - volts[end])));
    }
    i = end;
  }
  if (limit.runs < kRunsOfLimit) return std::nullopt;
  if (edges / static_cast<double>(limit.runs) < kStepsAtEdge * step_v) return std::nullopt;
  return limit;
}

/// Where a stretch is taken apart: pieces of whole cycles.
struct Pieces {
  std::size_t length = 0;
  std::vector<std::size_t> begins;
};

Pieces pieces_of(std::size_t frames, double rate_hz, double hz) {
  Pieces pieces;
  const double cycles = std::max(1.0, std::round(kFitS * hz));
  pieces.length = static_cast<std::size_t>(std::lround(cycles * rate_hz / hz));
  const std::size_t there = frames / pieces.length;
  const std::size_t taken = std::min(there, std::max<std::size_t>(1, kMostFitted / pieces.length));
  for (std::size_t k = 0; k < taken; ++k)
    pieces.begins.push_back(k * there / taken * pieces.length);
  return pieces;
}

int orders_within(double rate_hz, double hz) {
  const double reach = (rate_hz / 2.0 - 2.0 / kFitS) / hz;
  return static_cast<int>(std::clamp(std::floor(reach), 1.0, static_cast<double>(kHighestOrder)));
}

/// The pieces of one channel, taken apart.
struct Fitted {
  std::vector<HarmonicFit> pieces;
};

Fitted fitted(std::span<const float> volts, double rate_hz, double hz, const Pieces& pieces) {
  Fitted out;
  for (const std::size_t begin : pieces.begins)
    out.pieces.push_back(
        fit_harmonics(volts.subspan(begin, pieces.length), rate_hz, hz, orders_within(rate_hz, hz)));
  return out;
}

WaveFigures wave_of(const Fitted& fit, double rate_hz, double hz) {
  WaveFigures wave;
  wave.hz = hz;
  wave.highest_order = orders_within(rate_hz, hz);
  double fundamental = 0.0;
  double second = 0.0;
  double harmonics = 0.0;
  std::vector<double> noise;
  for (const HarmonicFit& piece : fit.pieces) {
    fundamental += std::norm(piece.orders.front());
    for (std::size_t i = 1; i < piece.orders.size(); ++i)
      harmonics += std::norm(piece.orders[i]);
    if (piece.orders.size() > 1) second += std::norm(piece.orders[1]);
    noise.push_back(piece.rest_v);
  }
  wave.fundamental_v = std::sqrt(fundamental / 2.0 / static_cast<double>(fit.pieces.size()));
  wave.thd_pct = 100.0 * std::sqrt(harmonics / fundamental);
  wave.second_pct = 100.0 * std::sqrt(second / fundamental);
  wave.noise_v = median(std::move(noise));
  return wave;
}

/// Angle of `of` against `against`, over all pieces.
double angle_between(const Fitted& of, const Fitted& against) {
  Phasor sum(0.0, 0.0);
  for (std::size_t k = 0; k < of.pieces.size(); ++k)
    sum += of.pieces[k].orders.front() * std::conj(against.pieces[k].orders.front());
  return degrees(sum);
}

std::optional<double> correlation(const Fitted& a, const Fitted& b) {
  double ab = 0.0;
  double aa = 0.0;
  double bb = 0.0;
  for (std::size_t k = 0; k < a.pieces.size(); ++k) {
    for (std::size_t i = 0; i < a.pieces[k].rest.size(); ++i) {
      const auto x = static_cast<double>(a.pieces[k].rest[i]);
      const auto y = static_cast<double>(b.pieces[k].rest[i]);
      ab += x * y;
      aa += x * x;
      bb += y * y;
    }
  }
  if (!(aa > 0.0) || !(bb > 0.0)) return std::nullopt;
  return ab / std::sqrt(aa * bb);
}

void add_extremes(ChannelFigures& figures, std::span<const float> volts) {
  if (volts.empty()) return;
  const auto [low, high] = std::minmax_element(volts.begin(), volts.end());
  figures.peak_v = static_cast<double>(std::max(std::abs(*low), std::abs(*high)));
  figures.crest = figures.rms_v > 0.0 ? figures.peak_v / figures.rms_v : 0.0;
  figures.constant = *low == *high && volts.size() > 1;
}

void add_limits(ChannelFigures& figures, std::span<const float> volts) {
  if (!figures.wave) return;
  const auto [low, high] = std::minmax_element(volts.begin(), volts.end());
  figures.upper_limit = limit_at(*high, volts, figures.step_v);
  figures.lower_limit = limit_at(*low, volts, figures.step_v);
}

void add_over_range(ChannelFigures& figures, const std::vector<bool>& over_range) {
  bool before = false;
  for (const bool now : over_range) {
    if (now) ++figures.over_range_frames;
    if (now && !before) ++figures.over_range_spans;
    before = now;
  }
}

}  // namespace

Probe::Probe(std::span<const config::ChannelSettings> channels, const acquire::StreamInfo& info)
    : rate_hz_(info.rate_hz), readings_every_s_(info.readings_every_s), live_(info.live) {
  for (const auto& settings : channels)
    channels_.push_back(settings.channel);
  volts_.resize(channels_.size());
  over_range_.resize(channels_.size());
}

void Probe::take(const measure::Block& block, double at_s) {
  const std::size_t frames = block.frames();
  if (frames == 0) return;
  const bool readings = readings_every_s_ > 0.0;
  const std::int64_t end = block.first.value + static_cast<std::int64_t>(frames);
  const std::size_t begun = volts_.front().size();
  if (stretches_.empty()) {
    first_ = block.first.value;
    first_end_ = end;
    first_at_s_ = at_s;
    stretches_.push_back({0, 0});
  } else {
    // A reading that is late by more than half its distance leaves one out at least.
    const std::int64_t late = block.first.value - next_;
    const auto distance = static_cast<std::int64_t>(readings_every_s_ * rate_hz_);
    const std::int64_t lost =
        readings ? (late + distance / 2) / std::max<std::int64_t>(1, distance) - 1 : late;
    if (lost > 0) {
      ++missing_.gaps;
      missing_.frames += lost;
      if (lost > missing_.longest) {
        missing_.longest = lost;
        missing_.longest_cause = block.gap;
      }
      stretches_.push_back({begun, begun});
    }
  }
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const auto volts = block.channel(c);
    volts_[c].insert(volts_[c].end(), volts.begin(), volts.end());
    over_range_[c].resize(begun + frames, false);
  }
  for (const measure::OverRangeSpan& span : block.over_range) {
    for (std::size_t i = span.first_frame; i < span.first_frame + span.frames; ++i)
      over_range_[span.channel][begun + i] = true;
  }
  if (block.anchor) anchored_hz_ = block.anchor->rate_hz;
  stretches_.back().end = begun + frames;
  next_ = end;
  last_at_s_ = at_s;
}

double Probe::seconds() const {
  return static_cast<double>(next_ - first_) / rate_hz_;
}

bool Probe::full() const {
  return volts_.front().size() * volts_.size() >= kMostValues;
}

Probe::Stretch Probe::longest() const {
  const auto it =
      std::max_element(stretches_.begin(), stretches_.end(),
                       [](const Stretch& a, const Stretch& b) { return a.end - a.begin < b.end - b.begin; });
  return it == stretches_.end() ? Stretch{0, 0} : *it;
}

RateFigures Probe::rate(const acquire::StreamHealth& health) const {
  RateFigures rate{rate_hz_, std::nullopt, 0.0};
  const double elapsed_s = last_at_s_ - first_at_s_;
  if (!live_ || readings_every_s_ > 0.0) return rate;
  if (health.rate_hz > 0.0) {
    rate.measured_hz = health.rate_hz;
    rate.error_ppm = 3.0 * health.rate_error_ppm;
  } else if (elapsed_s > 20.0 * kArrivalJitterS) {
    rate.measured_hz = anchored_hz_.value_or(static_cast<double>(next_ - first_end_) / elapsed_s);
    rate.error_ppm = 1e6 * kArrivalJitterS / elapsed_s;
  }
  return rate;
}

ProbeFigures Probe::figures(const acquire::StreamHealth& health) const {
  ProbeFigures figures;
  figures.readings = readings_every_s_ > 0.0;
  figures.frames = static_cast<std::int64_t>(volts_.front().size());
  figures.seconds = seconds();
  figures.missing = missing_;
  figures.rate = rate(health);
  figures.refused_bytes = health.refused_bytes;
  const Stretch stretch = longest();
  const std::size_t length = stretch.end - stretch.begin;
  if (!figures.readings) figures.longest_stretch_s = static_cast<double>(length) / rate_hz_;

  std::vector<std::optional<double>> hz(channels_.size());
  std::optional<double> common_hz;
  const auto stretch_of = [&](std::size_t c) {
    return std::span<const float>(volts_[c]).subspan(stretch.begin, length);
  };
  for (std::size_t c = 0; c < channels_.size() && !figures.readings; ++c) {
    hz[c] = fundamental_hz(stretch_of(c), rate_hz_);
    if (!common_hz) common_hz = hz[c];
  }
  const Pieces pieces = common_hz ? pieces_of(length, rate_hz_, *common_hz) : Pieces{};

  std::vector<Fitted> fits(channels_.size());
  std::optional<std::size_t> reference;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    ChannelFigures& channel = figures.channels.emplace_back();
    channel.channel = channels_[c];
    auto whole = figures.readings ? std::span<const float>(volts_[c]) : stretch_of(c);
    if (hz[c]) {
      const double cycle = rate_hz_ / *hz[c];
      const double cycles = std::floor(static_cast<double>(whole.size()) / cycle);
      whole = whole.first(std::min(whole.size(), static_cast<std::size_t>(std::lround(cycles * cycle))));
    }
    channel.rms_v = root_mean_square(whole);
    add_extremes(channel, volts_[c]);
    add_over_range(channel, over_range_[c]);
    if (figures.readings) continue;
    channel.dc_v = mean(whole);
    channel.step_v = smallest_step(volts_[c]);
    if (!hz[c] || pieces.begins.empty()) continue;
    fits[c] = fitted(stretch_of(c), rate_hz_, *hz[c], pieces);
    channel.wave = wave_of(fits[c], rate_hz_, *hz[c]);
    add_limits(channel, volts_[c]);
    if (!reference) reference = c;
    if (std::abs(*hz[c] - *hz[*reference]) < kSameFrequencyHz)
      channel.angle_deg = angle_between(fits[c], fits[*reference]);
  }

  for (std::size_t in = 0; in < channels_.size(); ++in) {
    for (std::size_t out = 0; out < channels_.size(); ++out) {
      if (channels_[in].side != Side::input || channels_[out].side != Side::output) continue;
      if (channels_[in].phase != channels_[out].phase) continue;
      PairFigures& pair = figures.pairs.emplace_back();
      pair.input = in;
      pair.output = out;
      const double input_v = figures.channels[in].rms_v;
      pair.ratio = input_v > 0.0 ? figures.channels[out].rms_v / input_v : 0.0;
      pair.identical = !figures.readings && volts_[in] == volts_[out] && !figures.channels[in].constant;
      const auto& wave_in = figures.channels[in].wave;
      const auto& wave_out = figures.channels[out].wave;
      if (!wave_in || !wave_out || std::abs(wave_in->hz - wave_out->hz) >= kSameFrequencyHz) continue;
      pair.skew_deg = angle_between(fits[out], fits[in]);
      pair.skew_us = *pair.skew_deg / 360.0 / wave_in->hz * 1e6;
      pair.noise_correlation = correlation(fits[in], fits[out]);
    }
  }
  return figures;
}

}  // namespace tramline
