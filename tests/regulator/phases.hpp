#pragma once

#include <cmath>
#include <cstdint>
#include <functional>
#include <variant>
#include <vector>

#include "config/site.hpp"
#include "daemon/measure/meter.hpp"
#include "daemon/regulator/regulator_watch.hpp"
#include "storage/records.hpp"

/// Half-cycle values of a made-up regulator, without waveforms, for the tests of what is read from them.
namespace tramline::regulator::testing {

/// The regulator of common practice (no source): 215 to 225 V, built for 160 to 270 V, 20 V a second.
inline config::Site site_215_225() {
  config::Site site;
  site.nominal_v = 220.0;
  site.nominal_hz = 50.0;
  for (const Side side : {Side::input, Side::output}) {
    config::ChannelSettings channel;
    channel.channel = {side, Phase::l1};
    site.channels.push_back(channel);
  }
  config::RegulatorSettings regulator;
  regulator.target_v = 220.0;
  regulator.band_low_v = 215.0;
  regulator.band_high_v = 225.0;
  regulator.ratio_min = 220.0 / 270.0;
  regulator.ratio_max = 220.0 / 160.0;
  regulator.speed_v_per_s = 20.0;
  site.regulator = regulator;
  return site;
}

/// Volts as a function of the time in seconds.
using Volts = std::function<double(double)>;

inline measure::HalfCycle half_cycle(Side side, double t, double volts) {
  measure::HalfCycle h;
  h.channel_index = side == Side::input ? 0 : 1;
  h.channel = {side, Phase::l1};
  h.value.begin = t * 6400.0;
  h.value.end = h.value.begin + 128.0;
  h.value.u_rms_v = volts;
  h.begin = {std::llround(t * 1e9)};
  h.elapsed_ns = h.begin.value;
  h.window_ns = 20 * kNsPerMillisecond;
  return h;
}

/// What the meter would give for these voltages: a value of each side each half cycle, and the events in
/// them.
inline measure::MeterOutput metered(const config::Site& site, const Volts& input, const Volts& output,
                                    double seconds, double begin_s = 0.0) {
  measure::MeterOutput out;
  std::vector<measure::EventDetector> detectors;
  for (const Side side : {Side::input, Side::output}) {
    detectors.emplace_back(side, std::vector<Phase>{Phase::l1}, site.nominal_v, site.events);
  }
  for (double t = begin_s; t < begin_s + seconds; t += 0.01) {
    for (const Side side : {Side::input, Side::output}) {
      if (!site.has(side)) continue;
      out.half_cycles.push_back(half_cycle(side, t, side == Side::input ? input(t) : output(t)));
      detectors[static_cast<std::size_t>(side)].take(out.half_cycles.back(), out.half_cycles.size() - 1,
                                                     out.events);
    }
  }
  for (auto& detector : detectors)
    detector.close(storage::EventEnd::stopped, out.half_cycles.size() - 1, out.events);
  out.stretch_ends.push_back({out.half_cycles.size() - 1, storage::EventEnd::stopped});
  return out;
}

inline std::vector<storage::Record> watched(const config::Site& site, const Volts& input, const Volts& output,
                                            double seconds, double begin_s = 0.0) {
  RegulatorWatch watch(site);
  std::vector<storage::Record> out;
  watch.take(metered(site, input, output, seconds, begin_s), out);
  watch.finish(out);
  return out;
}

template <class R>
std::vector<R> records_of(const std::vector<storage::Record>& records) {
  std::vector<R> found;
  for (const auto& record : records) {
    if (const R* r = std::get_if<R>(&record)) found.push_back(*r);
  }
  return found;
}

/// Events that have ended, of this kind and side.
inline std::vector<storage::Event> ended(const std::vector<storage::Record>& records, storage::EventKind kind,
                                         Side side) {
  auto events = records_of<storage::Event>(records);
  std::erase_if(events, [&](const storage::Event& e) {
    return e.kind != kind || e.side != side || e.end_reason == storage::EventEnd::open;
  });
  return events;
}

/// A sound servo: constant speed, stops in the middle of the band, ends of range; started at `ratio`.
inline Volts sound_servo(const config::Site& site, const Volts& input, double seconds, double speed_v_per_s) {
  std::vector<double> outputs;
  const auto& regulator = *site.regulator;
  double ratio = regulator.target_v / input(0.0);
  bool moving = false;
  for (double t = 0.0; t < seconds + 1.0; t += 0.01) {
    const double u = input(t);
    const double out = ratio * u;
    if (out < regulator.band_low_v || out > regulator.band_high_v) moving = true;
    const double error = regulator.target_v - out;
    if (std::abs(error) < 0.5) moving = false;
    if (moving) ratio += (error > 0.0 ? 1.0 : -1.0) * speed_v_per_s / site.nominal_v * 0.01;
    ratio = std::clamp(ratio, regulator.ratio_min, regulator.ratio_max);
    outputs.push_back(out);
  }
  return [outputs](double t) {
    return outputs[std::min(outputs.size() - 1, static_cast<std::size_t>(std::lround(t / 0.01)))];
  };
}

}  // namespace tramline::regulator::testing
