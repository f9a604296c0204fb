#pragma once

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <functional>
#include <numbers>
#include <string>
#include <utility>
#include <variant>
#include <vector>

#include "config/site.hpp"
#include "daemon/measure/block.hpp"
#include "daemon/measure/meter.hpp"

/// Made-up waveforms and a meter run over them, for the tests of the core.
namespace tramline::measure::testing {

inline constexpr double kRate = 6400.0;

/// Volts as a function of the time in seconds.
using Signal = std::function<double(double)>;

/// A sine of `volts` r.m.s. times `level(t)`; upward zero crossing at t = 0 (plus `degrees`).
inline Signal sine(
    double volts, double hz, std::function<double(double)> level = [](double) { return 1.0; },
    double degrees = 0.0) {
  return [=](double t) {
    return level(t) * volts * std::numbers::sqrt2 *
           std::sin(2.0 * std::numbers::pi * hz * t + degrees * std::numbers::pi / 180.0);
  };
}

/// 1 outside [from, to), `level` inside; half a sample of slack, so that a zero crossing on a sample is
/// inside.
inline std::function<double(double)> between(double from, double to, double level, double rate_hz = kRate) {
  const double slack = 0.5 / rate_hz;
  return [=](double t) { return t >= from - slack && t < to - slack ? level : 1.0; };
}

inline std::vector<float> sampled(const Signal& signal, double seconds, double rate_hz = kRate) {
  std::vector<float> volts(static_cast<std::size_t>(std::lround(seconds * rate_hz)));
  for (std::size_t n = 0; n < volts.size(); ++n)
    volts[n] = static_cast<float>(signal(static_cast<double>(n) / rate_hz));
  return volts;
}

inline config::Site site_of(std::vector<Channel> channels, double nominal_v = 230.0,
                            double nominal_hz = 50.0) {
  config::Site site;
  site.nominal_v = nominal_v;
  site.nominal_hz = nominal_hz;
  for (const Channel& channel : channels) {
    config::ChannelSettings settings;
    settings.channel = channel;
    site.channels.push_back(settings);
  }
  return site;
}

inline const std::vector<Channel> kOneInput = {{Side::input, Phase::l1}};
inline const std::vector<Channel> kThreeInputs = {
    {Side::input, Phase::l1}, {Side::input, Phase::l2}, {Side::input, Phase::l3}};
inline const std::vector<Channel> kInputAndOutput = {{Side::input, Phase::l1}, {Side::output, Phase::l1}};

/// A block that holds frames [from, to) of `channels`.
inline Block block_of(const std::vector<std::vector<float>>& channels, std::size_t from, std::size_t to) {
  Block block;
  block.resize(channels.size(), to - from);
  block.begin({static_cast<std::int64_t>(from)});
  for (std::size_t c = 0; c < channels.size(); ++c) {
    std::copy(channels[c].begin() + static_cast<std::ptrdiff_t>(from),
              channels[c].begin() + static_cast<std::ptrdiff_t>(to), block.channel(c).begin());
  }
  return block;
}

/// Everything the meter says of these samples, cut into blocks by `next_cut` (how many frames come next).
template <class NextCut>
MeterOutput metered(const config::Site& site, const std::vector<std::vector<float>>& channels,
                    NextCut next_cut, double rate_hz = kRate, UtcNs begin = {0}) {
  Meter meter(site, {begin, rate_hz, "test"});
  MeterOutput out;
  const std::size_t frames = channels.front().size();
  for (std::size_t from = 0; from < frames;) {
    const std::size_t to = std::min(frames, from + next_cut());
    meter.take(block_of(channels, from, to), out);
    from = to;
  }
  meter.finish(storage::EventEnd::stopped, "end of test", out);
  return out;
}

inline MeterOutput metered(const config::Site& site, const std::vector<std::vector<float>>& channels,
                           double rate_hz = kRate, UtcNs begin = {0}) {
  return metered(
      site, channels, [] { return std::size_t{1000}; }, rate_hz, begin);
}

inline std::vector<storage::Event> ended_events(const MeterOutput& out) {
  std::vector<storage::Event> events;
  for (const EventMark& mark : out.events) {
    if (mark.ended) events.push_back(mark.event);
  }
  return events;
}

template <class R>
std::vector<R> records_of(const MeterOutput& out) {
  std::vector<R> found;
  for (const auto& record : out.records) {
    if (const R* r = std::get_if<R>(&record)) found.push_back(*r);
  }
  return found;
}

inline std::vector<storage::Aggregate> aggregates_of(const MeterOutput& out, storage::Interval interval) {
  auto found = records_of<storage::Aggregate>(out);
  std::erase_if(found, [&](const storage::Aggregate& a) { return a.interval != interval; });
  return found;
}

}  // namespace tramline::measure::testing
