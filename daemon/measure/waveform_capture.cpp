#include "daemon/measure/waveform_capture.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <utility>

namespace tramline::measure {
namespace {

constexpr double kFullStep = 32767.0;
constexpr std::int64_t kDayNs = 86400 * kNsPerSecond;

std::int64_t samples(double milliseconds, double rate_hz) {
  return std::llround(milliseconds / 1000.0 * rate_hz);
}

storage::Waveform::Trace quantise(Channel channel, const float* volts, std::size_t count) {
  float peak = 0.0F;
  for (std::size_t i = 0; i < count; ++i)
    peak = std::max(peak, std::abs(volts[i]));
  storage::Waveform::Trace trace;
  trace.channel = channel;
  trace.volts_per_step = peak / static_cast<float>(kFullStep);
  trace.steps.resize(count);
  const float steps_a_volt = peak > 0.0F ? static_cast<float>(kFullStep) / peak : 0.0F;
  for (std::size_t i = 0; i < count; ++i)
    trace.steps[i] = static_cast<std::int16_t>(std::lround(volts[i] * steps_a_volt));
  return trace;
}

}  // namespace

WaveformCapture::WaveformCapture(std::vector<Channel> channels, double rate_hz,
                                 const config::CaptureSettings& settings)
    : channels_(std::move(channels)),
      before_(samples(settings.before_ms, rate_hz)),
      after_(samples(settings.after_ms, rate_hz)),
      longest_(samples(settings.longest_ms, rate_hz)),
      most_(static_cast<std::size_t>(before_ + std::max(longest_, after_))),
      bytes_a_day_(settings.per_day_mb * 1e6) {
  captures_.resize(2);
  for (Capture& capture : captures_)
    capture.volts.resize(most_ * channels_.size());
}

void WaveformCapture::begin(Capture& capture, std::int64_t from, std::int64_t limit) {
  capture.active = true;
  capture.from = from;
  capture.collected = from;
  capture.limit = limit;
  capture.to = limit;
  capture.open_events.clear();
}

void WaveformCapture::event_began(SamplePosition at) {
  const std::int64_t begin_at = std::llround(at);
  Capture& main = captures_[0];
  if (!main.active) begin(main, begin_at - before_, begin_at + longest_);
  main.open_events.push_back(at);
  main.to = main.limit;
}

void WaveformCapture::event_ended(SamplePosition began_at, SamplePosition at) {
  const std::int64_t end_at = std::llround(at);
  Capture& main = captures_[0];
  if (main.active) {
    const auto open = std::find(main.open_events.begin(), main.open_events.end(), began_at);
    if (open != main.open_events.end()) main.open_events.erase(open);
    if (main.open_events.empty()) main.to = std::min(main.limit, end_at + after_);
    if (end_at + after_ <= main.limit) return;
  }
  Capture& tail = captures_[1];
  if (!tail.active) begin(tail, end_at - before_, end_at + after_);
}

void WaveformCapture::collect(const std::vector<HalfCycleRms>& meters) {
  for (Capture& capture : captures_)
    collect(capture, meters);
}

void WaveformCapture::collect(Capture& capture, const std::vector<HalfCycleRms>& meters) const {
  if (!capture.active) return;
  const auto& held = meters.front().history().samples();
  if (capture.collected < held.begin())
    capture.from = capture.collected = held.begin();  // the stretch begins there
  const std::int64_t until =
      std::min({capture.limit, held.end(), capture.from + static_cast<std::int64_t>(most_)});
  if (until <= capture.collected) return;
  for (std::size_t c = 0; c < meters.size(); ++c) {
    const auto& samples_held = meters[c].history().samples();
    const std::size_t into = c * most_ + static_cast<std::size_t>(capture.collected - capture.from);
    std::copy(samples_held.at(capture.collected), samples_held.at(until),
              capture.volts.begin() + static_cast<std::ptrdiff_t>(into));
  }
  capture.collected = until;
}

void WaveformCapture::give_out_until(SamplePosition seen, const std::vector<HalfCycleRms>& meters,
                                     const SampleClock& clock, std::vector<storage::Record>& out) {
  for (Capture& capture : captures_) {
    if (!capture.active || static_cast<double>(capture.to) > seen) continue;
    collect(capture, meters);
    give_out(capture, clock, out);
  }
}

void WaveformCapture::finish(const std::vector<HalfCycleRms>& meters, const SampleClock& clock,
                             std::vector<storage::Record>& out) {
  give_out_until(std::numeric_limits<double>::infinity(), meters, clock, out);
}

void WaveformCapture::give_out(Capture& capture, const SampleClock& clock,
                               std::vector<storage::Record>& out) {
  capture.active = false;
  const std::int64_t to = std::min(capture.to, capture.collected);
  if (to <= capture.from) return;
  const auto count = static_cast<std::size_t>(to - capture.from);
  storage::Waveform record;
  record.begin_sample = {capture.from};
  record.begin = clock.utc_of(static_cast<double>(capture.from));
  record.end = clock.utc_of(static_cast<double>(to));
  record.rate_hz = clock.rate_hz();
  if (!within_allowance(count * channels_.size() * sizeof(std::int16_t), record.begin, out)) return;
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    record.traces.push_back(quantise(channels_[c], capture.volts.data() + c * most_, count));
  }
  out.emplace_back(std::move(record));
}

bool WaveformCapture::within_allowance(std::size_t bytes, UtcNs at, std::vector<storage::Record>& out) {
  const std::int64_t day = at.value / kDayNs;
  if (day != day_) {
    day_ = day;
    used_today_ = 0.0;
  }
  if (used_today_ + static_cast<double>(bytes) > bytes_a_day_) {
    out.emplace_back(storage::Loss{at, "waveform left out: the day's allowance is used up", 1});
    return false;
  }
  used_today_ += static_cast<double>(bytes);
  return true;
}

}  // namespace tramline::measure
