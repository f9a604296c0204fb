#include "daemon/acquire/live_source.hpp"

#include <time.h>

#include <algorithm>
#include <cmath>
#include <cstdlib>
#include <utility>

namespace tramline::acquire {
namespace {

constexpr std::chrono::milliseconds kWait(100);
constexpr double kMostWaitingS = 4.0;
constexpr std::int64_t kClockSetNs = 2 * kNsPerMillisecond;
constexpr double kLastAnchorDistanceS = 10.0;

std::int64_t ns_of(clockid_t clock) {
  timespec now{};
  clock_gettime(clock, &now);
  return std::int64_t{now.tv_sec} * kNsPerSecond + now.tv_nsec;
}

std::int64_t monotonic_ns() {
  return ns_of(CLOCK_MONOTONIC);
}

}  // namespace

void stamp(Arrival& arrival) {
  // The program may be held up between two readings; then they are taken again.
  constexpr std::int64_t kCloseTogetherNs = 20'000;
  for (int tries = 0; tries < 5; ++tries) {
    const std::int64_t before = monotonic_ns();
    arrival.utc_ns = ns_of(CLOCK_REALTIME);
    const std::int64_t after = monotonic_ns();
    arrival.monotonic_ns = before + (after - before) / 2;
    if (after - before < kCloseTogetherNs) return;
  }
}

LiveSource::LiveSource(std::unique_ptr<Device> device, std::vector<config::ChannelSettings> channels)
    : device_(std::move(device)), channels_(std::move(channels)), thread_([this] { run(); }) {}

LiveSource::~LiveSource() {
  stop_ = true;
  thread_.join();
}

void LiveSource::run() {
  const auto fail = [this](Error error) {
    const std::lock_guard guard(lock_);
    failed_ = std::move(error);
  };
  auto info = device_->open(stop_);
  if (!info) return fail(info.error());
  std::size_t most_waiting = 0;
  {
    const std::lock_guard guard(lock_);
    opened_ = std::move(info).value();
    most_waiting = static_cast<std::size_t>(kMostWaitingS * opened_->rate_hz);
  }
  const std::int64_t patience_ns = std::chrono::nanoseconds(device_->patience()).count();
  std::int64_t last_ns = monotonic_ns();
  Arrival arrival;
  while (!stop_) {
    arrival.clear();
    const auto came = device_->read(arrival, kWait);
    refused_bytes_ = device_->refused_bytes();
    if (!came) return fail(came.error());
    if (came.value() && arrival.frames > 0) {
      last_ns = monotonic_ns();
      const std::lock_guard guard(lock_);
      if (waiting_frames_ + arrival.frames > most_waiting && !waiting_.empty()) {
        overrun_frames_ += static_cast<std::int64_t>(arrival.frames);
        dropped_ = true;
      } else {
        hand_over(arrival);
      }
    } else if (monotonic_ns() - last_ns > patience_ns) {
      return fail({opened_->what, "nothing has come for " + std::to_string(patience_ns / kNsPerSecond) + " s",
                   "see that the device is powered and its cable plugged in"});
    }
  }
}

void LiveSource::hand_over(Arrival& arrival) {
  if (dropped_) {
    arrival.gap = measure::GapCause::overrun;
  } else if (arrival.gap == measure::GapCause::overrun && expected_ && arrival.first > *expected_) {
    overrun_frames_ += arrival.first - *expected_;  // by the device's own word
  }
  expected_ = arrival.first + static_cast<std::int64_t>(arrival.frames);
  dropped_ = false;
  waiting_frames_ += arrival.frames;
  waiting_.push_back(std::move(arrival));
  arrival = Arrival{};
  if (!emptied_.empty()) {
    arrival = std::move(emptied_.back());
    emptied_.pop_back();
  }
}

bool LiveSource::take_arrival() {
  const std::lock_guard guard(lock_);
  if (waiting_.empty()) return false;
  if (current_.frames > 0 && emptied_.size() < 8) emptied_.push_back(std::move(current_));
  current_ = std::move(waiting_.front());
  waiting_.pop_front();
  waiting_frames_ -= current_.frames;
  used_ = 0;
  return true;
}

Result<bool> LiveSource::ready() {
  if (ready_) return true;
  {
    const std::lock_guard guard(lock_);
    if (failed_ && waiting_.empty()) return *failed_;
    if (!opened_ || waiting_.empty()) return false;
    info_ = *opened_;
  }
  if (!take_arrival()) return false;
  info_.live = true;
  info_.dated = true;
  base_ = current_.first;
  fit_.emplace(info_.rate_hz);
  utc_offset_ns_ = current_.utc_ns - current_.monotonic_ns;
  note_time();
  info_.begin = utc_of(0);
  anchor_distance_ = std::llround(info_.rate_hz);
  next_anchor_ = anchor_distance_;
  ready_ = true;
  return true;
}

void LiveSource::note_time() {
  const std::int64_t first = current_.first - base_;
  fit_->take(first + static_cast<std::int64_t>(current_.frames), current_.monotonic_ns);
  const std::int64_t offset = current_.utc_ns - current_.monotonic_ns;
  if (std::abs(offset - utc_offset_ns_) > kClockSetNs) clock_set_ = true;
  utc_offset_ns_ = offset;
}

UtcNs LiveSource::utc_of(std::int64_t index) const {
  // A polled meter's index is the monotonic clock itself. Else a sample had come when one more was counted.
  const bool polled = info_.readings_every_s > 0.0;
  const std::int64_t monotonic =
      polled ? current_.monotonic_ns + (index - (current_.first - base_)) * kNsPerMillisecond
             : fit_->time_of(index + 1);
  return {monotonic + utc_offset_ns_};
}

std::optional<measure::ClockAnchor> LiveSource::due_anchor() {
  const bool polled = info_.readings_every_s > 0.0;
  if (!clock_set_ && (polled || next_ < next_anchor_)) return std::nullopt;
  const auto cause = clock_set_ ? measure::AnchorCause::clock_set : measure::AnchorCause::refined;
  clock_set_ = false;
  anchor_distance_ =
      std::min<std::int64_t>(2 * anchor_distance_, std::llround(kLastAnchorDistanceS * info_.rate_hz));
  next_anchor_ = next_ + anchor_distance_;
  return measure::ClockAnchor{{next_}, utc_of(next_), polled ? info_.rate_hz : fit_->rate_hz(), cause};
}

bool LiveSource::finite(std::size_t frame) const {
  for (std::size_t c = 0; c < channels_.size(); ++c) {
    const double raw = current_.values[frame * channels_.size() + c];
    if (!std::isfinite(static_cast<float>((raw + channels_[c].offset) * channels_[c].scale))) return false;
  }
  return true;
}

void LiveSource::give(measure::Block& block, std::size_t from, std::size_t frames) {
  const std::size_t width = channels_.size();
  const std::size_t place = frames_.size() / width;
  for (std::size_t i = from; i < from + frames; ++i) {
    bool at_limit = false;
    for (std::size_t c = 0; c < width; ++c) {
      const double raw = current_.values[i * width + c];
      double volts = (raw + channels_[c].offset) * channels_[c].scale;
      // The line that calibrates a meter of r.m.s. values may lead below zero, where there are none.
      if (info_.readings_every_s > 0.0 && volts < 0.0) volts = 0.0;
      frames_.push_back(static_cast<float>(volts));
      if (channels_[c].range_v > 0.0 && std::abs(volts) >= channels_[c].range_v) {
        block.over_range.push_back({c, place + i - from, 1});
        at_limit = true;
      }
    }
    if (at_limit) ++health_.over_range_frames;
  }
  for (const measure::OverRangeSpan& span : current_.over_range) {
    const std::size_t begin = std::max(span.first_frame, from);
    const std::size_t end = std::min(span.first_frame + span.frames, from + frames);
    if (begin >= end) continue;
    block.over_range.push_back({span.channel, place + begin - from, end - begin});
    health_.over_range_frames += static_cast<std::int64_t>(end - begin);
  }
}

Result<bool> LiveSource::next(measure::Block& block, std::size_t most_frames) {
  const std::size_t width = channels_.size();
  const bool polled = info_.readings_every_s > 0.0;
  frames_.clear();
  block.resize(width, 0);
  block.begin({next_});
  std::size_t frames = 0;
  while (frames < most_frames) {
    if (used_ == current_.frames) {
      // An anchor stands at the begin of a block.
      if (frames > 0 && (clock_set_ || polled || next_ >= next_anchor_)) break;
      if (!take_arrival()) break;
      note_time();
      if (frames > 0 && clock_set_) break;
    }
    if (!finite(used_)) {
      if (frames > 0) break;
      unreadable_ = true;
      ++health_.lost_frames;
      ++used_;
      continue;
    }
    const std::int64_t index = current_.first - base_ + static_cast<std::int64_t>(used_);
    if (index < next_) {  // counted already: the device repeats itself
      ++used_;
      continue;
    }
    if (index > next_ && !polled) {
      if (frames > 0) break;
      block.gap = unreadable_ ? measure::GapCause::not_a_number : current_.gap;
      if (!unreadable_ && current_.gap != measure::GapCause::overrun) health_.lost_frames += index - next_;
    }
    if (frames == 0) {
      next_ = index;
      block.first = {index};
      block.anchor = due_anchor();
      unreadable_ = false;
    }
    std::size_t run = 1;
    const std::size_t most = std::min(most_frames - frames, current_.frames - used_);
    while (!polled && run < most && finite(used_ + run))
      ++run;
    give(block, used_, run);
    used_ += run;
    frames += run;
    next_ = index + static_cast<std::int64_t>(run);
    if (polled) break;
  }
  if (frames == 0) {
    const std::lock_guard guard(lock_);
    if (failed_ && waiting_.empty()) return *failed_;
    return true;
  }
  health_.frames += static_cast<std::int64_t>(frames);
  block.resize(width, frames);
  for (std::size_t c = 0; c < width; ++c) {
    const auto volts = block.channel(c);
    for (std::size_t i = 0; i < frames; ++i)
      volts[i] = frames_[i * width + c];
  }
  return true;
}

StreamHealth LiveSource::health() const {
  StreamHealth health = health_;
  {
    const std::lock_guard guard(lock_);
    health.overrun_frames = overrun_frames_;
  }
  health.refused_bytes = refused_bytes_;
  if (fit_ && fit_->measured() && info_.readings_every_s == 0.0) {
    health.rate_hz = fit_->rate_hz();
    health.rate_error_ppm = fit_->rate_error_ppm();
    health.time_error_ns = fit_->spread_ns();
  }
  return health;
}

}  // namespace tramline::acquire
