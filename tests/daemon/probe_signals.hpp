#pragma once

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <functional>
#include <limits>
#include <map>
#include <numbers>
#include <random>
#include <utility>
#include <vector>

#include "config/site.hpp"
#include "daemon/probe_figures.hpp"

/// Made-up installations, right and wrong, for the tests of the probe.
namespace tramline::testing {

/// White noise by the polar method on a generator whose numbers the standard fixes.
class Noise {
 public:
  explicit Noise(std::uint64_t seed) : random_(seed) {}
  double next() {
    for (;;) {
      const double x = uniform();
      const double y = uniform();
      const double r = x * x + y * y;
      if (r > 0.0 && r < 1.0) return x * std::sqrt(-2.0 * std::log(r) / r);
    }
  }

 private:
  double uniform() { return static_cast<double>(random_() >> 11U) * 0x1.0p-52 - 1.0; }
  std::mt19937_64 random_;
};

/// What one sensor gives.
struct Signal {
  double rms_v = 230.0;  // of the fundamental
  double hz = 50.0;
  double degrees = 0.0;
  std::map<int, double> harmonics_pct = {};
  double dc_v = 0.0;
  double noise_v = 0.0;                                             // of its own
  double common_noise_v = 0.0;                                      // of the supply: the same in all sensors
  double late_s = 0.0;                                              // sampled so much after the frame's time
  double gain = 1.0;                                                // wrong scale
  std::function<double(double)> bent = [](double v) { return v; };  // by sensor and converter
};

inline double clean_value(const Signal& signal, double t) {
  const double angle =
      2.0 * std::numbers::pi * signal.hz * (t + signal.late_s) + signal.degrees * std::numbers::pi / 180.0;
  double v = std::sin(angle);
  for (const auto& [order, pct] : signal.harmonics_pct)
    v += pct / 100.0 * std::sin(order * angle);
  return signal.rms_v * std::numbers::sqrt2 * v;
}

/// The samples of all sensors, planar.
inline std::vector<std::vector<float>> samples_of(const std::vector<Signal>& signals, double seconds,
                                                  double rate_hz, std::uint64_t seed = 1) {
  std::vector<std::vector<float>> all;
  for (std::size_t c = 0; c < signals.size(); ++c) {
    const Signal& signal = signals[c];
    Noise own(seed * 1000 + c);
    Noise common(seed * 1000 + 999);
    auto& volts = all.emplace_back(static_cast<std::size_t>(std::lround(seconds * rate_hz)));
    for (std::size_t n = 0; n < volts.size(); ++n) {
      const double v = clean_value(signal, static_cast<double>(n) / rate_hz) +
                       signal.common_noise_v * common.next() + signal.noise_v * own.next();
      volts[n] = static_cast<float>(signal.bent(signal.gain * (v + signal.dc_v)));
    }
  }
  return all;
}

inline measure::Block block_of(const std::vector<std::vector<float>>& channels, std::size_t from,
                               std::size_t to, std::int64_t index) {
  measure::Block block;
  block.resize(channels.size(), to - from);
  block.begin({index});
  for (std::size_t c = 0; c < channels.size(); ++c) {
    std::copy(channels[c].begin() + static_cast<std::ptrdiff_t>(from),
              channels[c].begin() + static_cast<std::ptrdiff_t>(to), block.channel(c).begin());
  }
  return block;
}

inline acquire::StreamInfo stream(double rate_hz, bool live = false) {
  acquire::StreamInfo info;
  info.what = "made up for a test";
  info.rate_hz = rate_hz;
  info.live = live;
  return info;
}

/// Cuts samples into blocks: how many frames come next.
using NextCut = std::function<std::size_t()>;

/// The figures of `channels`; at or above `range_v` of its channel a sample is over-range.
inline ProbeFigures probed(const config::Site& site, const std::vector<std::vector<float>>& channels,
                           double rate_hz, const NextCut& next_cut) {
  Probe probe(site.channels, stream(rate_hz));
  for (std::size_t from = 0; from < channels.front().size();) {
    const std::size_t to = std::min(channels.front().size(), from + next_cut());
    measure::Block block = block_of(channels, from, to, static_cast<std::int64_t>(from));
    for (std::size_t c = 0; c < channels.size(); ++c) {
      const double limit = site.channels[c].range_v;
      for (std::size_t i = 0; i < to - from && limit > 0.0; ++i) {
        if (std::abs(static_cast<double>(block.channel(c)[i])) >= limit)
          block.over_range.push_back({c, i, 1});
      }
    }
    probe.take(block, static_cast<double>(to) / rate_hz);
    from = to;
  }
  return probe.figures({});
}

inline ProbeFigures probed(const config::Site& site, const std::vector<std::vector<float>>& channels,
                           double rate_hz) {
  return probed(site, channels, rate_hz, [] { return std::size_t{640}; });
}

/// 230 V, 50 Hz, a regulator of ±3 % for 170 to 270 V; one phase or three, sensors on both sides.
inline config::Site household(int phases = 1) {
  config::Site site;
  site.name = "Fernhollow 12";
  site.nominal_v = 230.0;
  site.nominal_hz = 50.0;
  site.phases = phases;
  for (const Side side : {Side::input, Side::output}) {
    for (int p = 0; p < phases; ++p) {
      config::ChannelSettings settings;
      settings.channel = {side, static_cast<Phase>(p)};
      site.channels.push_back(settings);
    }
  }
  config::RegulatorSettings regulator;
  regulator.target_v = 230.0;
  regulator.band_low_v = 223.1;
  regulator.band_high_v = 236.9;
  regulator.ratio_min = 230.0 / 270.0;
  regulator.ratio_max = 230.0 / 170.0;
  site.regulator = regulator;
  return site;
}

inline config::Site with_input_only() {
  config::Site site = household();
  site.channels.pop_back();
  return site;
}

}  // namespace tramline::testing
