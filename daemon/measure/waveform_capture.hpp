#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <vector>

#include "config/site.hpp"
#include "config/units.hpp"
#include "daemon/measure/half_cycle_rms.hpp"
#include "daemon/measure/sample_clock.hpp"
#include "storage/records.hpp"

namespace tramline::measure {

/// Keeps the waveform of all channels around events, within fixed memory and a daily allowance of bytes.
///
/// A capture begins `before_ms` before an event begins and ends `after_ms` after the last event in it has
/// ended, or `longest_ms` after its first event began, whichever comes first; an event that outlasts it gets
/// a second one around its end. Which samples are kept depends on the events alone, not on how the samples
/// were cut into blocks. One thread. Buffers are allocated when constructed; a finished capture is copied
/// into its record.
class WaveformCapture {
 public:
  WaveformCapture(std::vector<Channel> channels, double rate_hz, const config::CaptureSettings& settings);

  /// How many samples of history a capture reaches back from the begin of an event.
  [[nodiscard]] std::size_t samples_before() const { return static_cast<std::size_t>(before_); }

  /// An event begins, or the one that began at `began_at` ends, at a position that the meters' histories
  /// still hold.
  void event_began(SamplePosition at);
  void event_ended(SamplePosition began_at, SamplePosition at);

  /// Copies what has been measured since; call after each feed, while the histories still hold it.
  void collect(const std::vector<HalfCycleRms>& meters);

  /// No event before `seen` is still to come: gives out the captures that end before it. Call before the
  /// events at `seen`.
  void give_out_until(SamplePosition seen, const std::vector<HalfCycleRms>& meters, const SampleClock& clock,
                      std::vector<storage::Record>& out);

  /// The stretch ends: gives out what there is.
  void finish(const std::vector<HalfCycleRms>& meters, const SampleClock& clock,
              std::vector<storage::Record>& out);

 private:
  struct Capture {
    bool active = false;
    std::int64_t from = 0;
    std::int64_t to = 0;                      // not included; moves earlier when the last event in it ends
    std::int64_t limit = 0;                   // `to` never lies beyond
    std::int64_t collected = 0;               // samples [from, collected) are in `volts`
    std::vector<SamplePosition> open_events;  // begins of those that go on in it
    std::vector<float> volts;                 // planar, `most_` a channel
  };
  static void begin(Capture& capture, std::int64_t from, std::int64_t limit);
  void collect(Capture& capture, const std::vector<HalfCycleRms>& meters) const;
  void give_out(Capture& capture, const SampleClock& clock, std::vector<storage::Record>& out);
  [[nodiscard]] bool within_allowance(std::size_t bytes, UtcNs at, std::vector<storage::Record>& out);

  std::vector<Channel> channels_;
  std::int64_t before_;
  std::int64_t after_;
  std::int64_t longest_;
  std::size_t most_;  // samples a channel in one capture
  double bytes_a_day_;
  std::int64_t day_ = 0;
  double used_today_ = 0.0;
  std::vector<Capture> captures_;  // the main one, and one for the end of a long event
};

}  // namespace tramline::measure
