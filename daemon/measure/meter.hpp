#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "config/site.hpp"
#include "config/units.hpp"
#include "daemon/measure/aggregator.hpp"
#include "daemon/measure/block.hpp"
#include "daemon/measure/event_detector.hpp"
#include "daemon/measure/flag_timeline.hpp"
#include "daemon/measure/frequency_meter.hpp"
#include "daemon/measure/half_cycle.hpp"
#include "daemon/measure/half_cycle_rms.hpp"
#include "daemon/measure/sample_clock.hpp"
#include "daemon/measure/waveform_capture.hpp"
#include "storage/records.hpp"

namespace tramline::measure {

/// Measuring has a hole, or its end, after the half-cycle value with this index.
struct StretchEnd {
  std::size_t after = 0;
  storage::EventEnd reason = storage::EventEnd::gap;
};

/// What the meter gives for the samples it took. The caller clears it; its vectors keep their room.
struct MeterOutput {
  std::vector<HalfCycle> half_cycles;  ///< all channels, by the begin of their windows
  std::vector<EventMark> events;       ///< in the order of the half-cycle values that made them
  std::vector<StretchEnd> stretch_ends;
  std::vector<storage::Record> records;  ///< everything else

  void clear() {
    half_cycles.clear();
    events.clear();
    stretch_ends.clear();
    records.clear();
  }
};

/// What the stream is like that the meter is to measure.
struct StreamShape {
  UtcNs begin;  ///< time of sample 0
  double rate_hz = 0.0;
  std::string why_begun;  ///< for the coverage record
};

/// The measurement core of a site: blocks of volts in, half-cycle values, events and records out.
///
/// Reads no clock, does no I/O, logs nothing, throws nothing per block and allocates nothing per sample. The
/// same samples give the same output however they are cut into blocks. The first channel (an input, where
/// there is one) is the reference for block limits and frequency. One thread.
class Meter {
 public:
  Meter(const config::Site& site, const StreamShape& stream);

  /// Takes the next block: channels in the site's order, finite volts. A gap before it ends the stretch of
  /// coverage; an event under way then is closed, since what followed is not known.
  void take(const Block& block, MeterOutput& out);

  /// Measuring ends: closes what is open with `reason`, gives out the intervals in progress, and ends
  /// coverage with `why`.
  void finish(storage::EventEnd reason, const std::string& why, MeterOutput& out);

  void clock_state(const storage::ClockState& state);

 private:
  void begin_stretch(SampleIndex at, const std::string& why, MeterOutput& out);
  void end_stretch(storage::EventEnd reason, const std::string& why, MeterOutput& out);
  void take_chunk(const Block& block, std::size_t from, std::size_t frames, MeterOutput& out);
  /// The channel whose next half-cycle value begins first; none while one might still give an earlier one,
  /// unless `all` that will come has come.
  [[nodiscard]] std::optional<std::size_t> earliest(bool all) const;
  void give_out_half_cycles(bool all, MeterOutput& out);
  void give_out(std::size_t channel_index, MeterOutput& out);
  void note_events(std::size_t from, MeterOutput& out);
  [[nodiscard]] std::int64_t measured_ns(SamplePosition until) const;

  std::vector<Channel> channels_;
  double rate_hz_;
  SampleClock clock_;
  WaveformCapture capture_;
  std::vector<HalfCycleRms> meters_;  // a channel each
  struct Queue {
    std::vector<HalfCycleValue> values;
    std::size_t next = 0;
    [[nodiscard]] bool empty() const { return next == values.size(); }
    [[nodiscard]] const HalfCycleValue& front() const { return values[next]; }
  };
  std::vector<Queue> queues_;                            // a channel each
  std::vector<std::vector<GridTick>> ticks_;             // a channel each, of the chunk in hand
  std::vector<std::optional<EventDetector>> detectors_;  // by side
  FlagTimeline flags_;
  Aggregator aggregator_;
  FrequencyMeter frequency_;
  storage::ClockState clock_state_;

  bool in_stretch_ = false;
  std::string why_begun_;
  std::int64_t stretch_begin_ns_ = 0;  // in sample time
  SampleIndex next_sample_;
  SamplePosition next_progress_ = 0.0;  // when to report how far coverage reaches
};

}  // namespace tramline::measure
