#pragma once

#include <atomic>
#include <cstdint>
#include <deque>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <thread>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/clock_fit.hpp"
#include "daemon/acquire/device.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// Makes a Source of a Device: runs it on a thread of its own, and scales, places in time and hands out what
/// it gave.
///
/// The two threads meet at one bounded queue. If nobody takes frames for four seconds, new ones are dropped
/// and counted, and show as a gap with the cause `overrun`. Sample 0 is the first frame that came. Time: the
/// sample rate is measured against the kernel's monotonic clock (ClockFit), and every ten seconds, at first
/// more often, an anchor says the time anew; where UTC was set, at once.
class LiveSource : public Source {
 public:
  LiveSource(std::unique_ptr<Device> device, std::vector<config::ChannelSettings> channels);
  /// Stops the device; waits for its thread, at most as long as the device waits for frames.
  ~LiveSource() override;
  LiveSource(const LiveSource&) = delete;
  LiveSource& operator=(const LiveSource&) = delete;

  Result<bool> ready() override;
  [[nodiscard]] const StreamInfo& info() const override { return info_; }
  Result<bool> next(measure::Block& block, std::size_t most_frames) override;
  [[nodiscard]] std::string end_remark() const override { return "the source was closed"; }
  [[nodiscard]] double progress() const override { return 0.0; }
  [[nodiscard]] StreamHealth health() const override;

 private:
  // ---- on the device's thread
  void run();
  void hand_over(Arrival& arrival);

  // ---- on the caller's thread
  [[nodiscard]] bool take_arrival();
  void note_time();
  [[nodiscard]] std::optional<measure::ClockAnchor> due_anchor();
  [[nodiscard]] UtcNs utc_of(std::int64_t index) const;
  [[nodiscard]] bool finite(std::size_t frame) const;
  void give(measure::Block& block, std::size_t from, std::size_t frames);

  std::unique_ptr<Device> device_;
  std::vector<config::ChannelSettings> channels_;

  // Where the threads meet; all under `lock_`.
  mutable std::mutex lock_;
  std::optional<StreamInfo> opened_;
  std::optional<Error> failed_;
  std::deque<Arrival> waiting_;
  std::size_t waiting_frames_ = 0;
  std::vector<Arrival> emptied_;  // to be filled again
  std::int64_t overrun_frames_ = 0;
  bool dropped_ = false;                  // since the newest in `waiting_`
  std::optional<std::int64_t> expected_;  // what follows that one without a gap
  std::atomic<std::int64_t> refused_bytes_{0};
  std::atomic<bool> stop_{false};

  // The caller's.
  StreamInfo info_;
  bool ready_ = false;
  std::optional<ClockFit> fit_;
  Arrival current_;
  std::size_t used_ = 0;     // frames of `current_`
  std::int64_t base_ = 0;    // device's number of sample 0
  std::int64_t next_ = 0;    // index that follows without a gap
  bool unreadable_ = false;  // frames just before were left out for want of a number
  std::int64_t utc_offset_ns_ = 0;
  bool clock_set_ = false;
  std::int64_t next_anchor_ = 0;
  std::int64_t anchor_distance_ = 0;
  StreamHealth health_;
  std::vector<float> frames_;  // of the block being filled

  std::thread thread_;  // last: everything it uses is there when it starts
};

}  // namespace tramline::acquire
