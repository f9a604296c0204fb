#pragma once

#include <array>
#include <cstddef>
#include <optional>
#include <vector>

#include "config/site.hpp"
#include "daemon/measure/meter.hpp"
#include "daemon/regulator/band_keeping.hpp"
#include "daemon/regulator/correction_detector.hpp"
#include "daemon/regulator/excursion_detector.hpp"
#include "daemon/regulator/excursion_figures.hpp"
#include "daemon/regulator/half_cycle_pair.hpp"
#include "daemon/regulator/ideal_servo.hpp"
#include "storage/records.hpp"

namespace tramline::regulator {

/// The regulator as seen through the two voltages: the one place where the half-cycle pair (input, output,
/// ratio) flows.
///
/// Takes what the meter gives and adds: for each 10 minutes and phase how the band was kept and what the
/// servo did; its corrections; excursions from the band; for each event of the output its origin, for each
/// event of the input whether the regulator held it off. All events leave through here. Pure like the meter:
/// no clock, no I/O. One thread.
class RegulatorWatch {
 public:
  /// `site` must outlive the watch. `sampled` false: the half-cycle values are a polled meter's readings, too
  /// far apart to show the servo's movements, so no corrections are given.
  explicit RegulatorWatch(const config::Site& site, bool sampled = true);

  /// State of the clock, for the events to come.
  void clock_state(const storage::ClockState& state) { clock_ = state; }

  /// Takes the meter's next output; appends events and the regulator's own records.
  void take(const measure::MeterOutput& metered, std::vector<storage::Record>& out);

  /// No more will come: the intervals in progress.
  void finish(std::vector<storage::Record>& out);

 private:
  /// One phase of the regulator.
  struct PhaseWatch {
    PhaseWatch(Phase phase, const config::Site& site, bool sampled);
    Phase phase;
    PairMaker pairs;
    BandKeeping keeping;
    std::optional<IdealServo> ideal;
    std::optional<CorrectionDetector> corrections;
    ExcursionDetector excursions;
  };
  /// An event of either side that goes on, with what is known of the other side meanwhile.
  struct OpenEvent {
    Side side;
    storage::EventKind kind;
    SampleIndex begin_sample;
    std::array<ExcursionFigures, 3> figures;  // by phase; output events only
    bool output_showed = false;               // input events only
  };

  void take(const measure::HalfCycle& half_cycle, std::vector<storage::Record>& out);
  void take(const HalfCyclePair& pair, PhaseWatch& phase, std::vector<storage::Record>& out);
  void take(const measure::EventMark& mark, std::vector<storage::Record>& out);
  void end_stretch(storage::EventEnd reason, std::vector<storage::Record>& out);
  static void give_out(std::optional<storage::Correction> correction, PhaseWatch& phase,
                       std::vector<storage::Record>& out);
  void output_shows();

  const config::Site& site_;
  config::Site::Band band_;
  bool both_sides_;
  std::vector<PhaseWatch> phases_;
  std::array<std::size_t, 3> place_of_{};  // of a phase, in `phases_`
  std::vector<OpenEvent> open_;
  storage::ClockState clock_;
};

}  // namespace tramline::regulator
