#pragma once

#include <cstdint>
#include <optional>

#include "config/site.hpp"
#include "daemon/regulator/excursion_figures.hpp"
#include "daemon/regulator/half_cycle_pair.hpp"
#include "storage/records.hpp"

namespace tramline::regulator {

/// Excursions of one phase of the output from the regulator's band.
///
/// A servo is expected to let the output touch the edge of its band and to bring it back; so the band is
/// taken with the regulator's tolerance, and an excursion counts only once it has lasted longer than the
/// regulator's grace, or at once if it goes past a sag, swell or interruption threshold. It ends when the
/// output has been in band for 0.2 s without a break, and its end is the begin of that stretch. One phase,
/// one thread.
class ExcursionDetector {
 public:
  ExcursionDetector(Phase phase, const config::Site& site);

  /// Takes the next pair; `ideal_in_band` as for ExcursionFigures. Gives the event when it begins to count
  /// and, complete and judged, when it has ended.
  [[nodiscard]] std::optional<storage::Event> take(const HalfCyclePair& pair, bool ideal_in_band);

  /// Measuring has a hole or its end here: closes what is open.
  [[nodiscard]] std::optional<storage::Event> close(storage::EventEnd reason);

  /// Whether the output is outside the band, or has not yet been back in it for long enough.
  [[nodiscard]] bool under_way() const { return out_; }
  /// Whether an excursion that counts is under way.
  [[nodiscard]] bool open() const { return counted_; }

 private:
  [[nodiscard]] storage::Event end(storage::EventEnd reason);
  void begin(const HalfCyclePair& pair);

  const config::Site& site_;
  config::Site::Band band_;
  std::int64_t grace_ns_;
  double sag_v_;
  double swell_v_;

  bool out_ = false;      // out of band, or back for less than 0.2 s
  bool counted_ = false;  // and for long enough, or far enough, to be an event
  std::int64_t begin_ns_ = 0;
  std::optional<HalfCyclePair> back_;  // the first pair back in band
  HalfCyclePair last_;
  ExcursionFigures figures_;
  storage::Event event_;
};

}  // namespace tramline::regulator
