#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <optional>
#include <vector>

#include "config/site.hpp"
#include "config/units.hpp"
#include "daemon/measure/half_cycle.hpp"
#include "storage/records.hpp"

namespace tramline::measure {

/// An event at the moment it begins or ends, with the place in the stream of half-cycle values where that
/// shows.
struct EventMark {
  std::size_t after = 0;  ///< index, in the same output, of the half-cycle value that began or ended it
  bool ended = false;
  SamplePosition begin = 0.0;  ///< begin of the event
  SamplePosition end = 0.0;    ///< end of the event; its begin while it goes on
  storage::Event event;
};

/// Sags, swells and interruptions of one side, one or three phases (IEC 61000-4-30:2015, 5.4 and 5.5).
///
/// Polyphase: a sag or swell begins with the first phase past the threshold and ends when all phases are back
/// past threshold and hysteresis; an interruption begins when all phases are below and ends with the first
/// one back. An interruption is also a sag; both are recorded. One side, one thread; allocates nothing.
class EventDetector {
 public:
  /// `phases` of `side` are measured. Thresholds are shares of `nominal_v` (U_din).
  EventDetector(Side side, const std::vector<Phase>& phases, double nominal_v,
                const config::EventSettings& settings);

  /// Takes the half-cycle values of this side in the order of their begins; `index` is the value's place in
  /// the output. Appends a mark for each event that begins or ends with it.
  void take(const HalfCycle& half_cycle, std::size_t index, std::vector<EventMark>& out);

  /// Measuring stops after the last value taken: closes what is open, with this reason.
  void close(storage::EventEnd reason, std::size_t index, std::vector<EventMark>& out);

 private:
  static constexpr std::size_t kKinds = 3;

  /// One kind of event: its limits and, while it goes on, its state.
  struct Watch {
    storage::EventKind kind = storage::EventKind::sag;
    double threshold_v = 0.0;
    double end_v = 0.0;  // back at or past this: recovered
    bool open = false;
    SamplePosition begin = 0.0;
    std::int64_t begin_elapsed_ns = 0;
    storage::Event event;
  };
  [[nodiscard]] bool past_threshold(const Watch& watch, double volts) const;
  [[nodiscard]] bool recovered(const Watch& watch, double volts) const;
  [[nodiscard]] bool begins(const Watch& watch) const;
  [[nodiscard]] bool ends(const Watch& watch) const;
  void begin(Watch& watch, const HalfCycle& by, std::size_t index, std::vector<EventMark>& out);
  void follow(Watch& watch, const HalfCycle& value) const;
  void end(Watch& watch, const HalfCycle& by, storage::EventEnd reason, std::size_t index,
           std::vector<EventMark>& out);
  [[nodiscard]] const Watch& sag() const { return watches_[0]; }
  [[nodiscard]] const Watch& swell() const { return watches_[1]; }

  std::size_t phase_count_;
  std::array<Watch, kKinds> watches_;  // sag, swell, interruption
  std::size_t open_count_ = 0;
  struct Latest {
    bool known = false;
    HalfCycle value;
  };
  std::array<Latest, 3> latest_{};  // by phase
  HalfCycle last_;
};

}  // namespace tramline::measure
