#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <vector>

#include "config/site.hpp"
#include "config/units.hpp"
#include "daemon/acquire/noise.hpp"

namespace tramline::acquire {

/// The simulated supply: a waveform of slowly wandering voltage and frequency, with harmonics, noise, and
/// what the script does to it, for one or three phases. The same settings give the same samples.
class GridModel {
 public:
  /// Frames are made in chunks of this many; level and frequency move linearly within one.
  static constexpr std::size_t kChunk = 32;

  /// `nominal_v`: used where the settings give no voltage.
  GridModel(const config::SimulatorSettings& settings, double nominal_v, double nominal_hz, int phases);

  /// R.m.s. voltage of a phase at the next frame, noise and scripted sags, swells and interruptions apart.
  [[nodiscard]] double rms_v(std::size_t phase) const { return volts_[phase] * form_; }

  /// Makes the next kChunk frames of every phase; `volts[p]` has room for them.
  void next(const std::array<float*, 3>& volts);

 private:
  /// A scripted change of the voltage, on samples.
  struct Change {
    std::int64_t begin;
    std::int64_t end;
    double factor;
    unsigned phases;  // bit p
  };
  /// A scripted level: ramps to a voltage, holds, ramps back.
  struct Level {
    double begin_s, full_s, hold_s, end_s, to_v;
    unsigned phases;
  };
  [[nodiscard]] double wandering_v(double t_s) const;
  /// The scripted levels laid over the wandering voltage `volts`.
  [[nodiscard]] double levelled_v(double volts, std::size_t phase, double t_s) const;
  [[nodiscard]] double frequency_hz(double t_s) const;
  void place(const config::ScriptedHappening& happening);
  void apply_changes(std::size_t phase, float* volts) const;

  double rate_hz_;
  double voltage_v_;
  double nominal_hz_;
  std::size_t phases_;
  config::GridSettings grid_;
  double form_ = 1.0;         // r.m.s. with the harmonics, over that of the fundamental
  std::vector<float> table_;  // one cycle of fundamental and harmonics, 1 V r.m.s. of fundamental
  std::vector<config::ScriptedHappening> waiting_;  // not yet placed on the wave; the next one last
  std::vector<Change> changes_;                     // under way or about to begin
  std::vector<Level> levels_;
  struct Wander {
    double hz, phase, share;
  };
  std::array<Wander, 4> voltage_wander_{};
  std::array<Wander, 3> frequency_wander_{};
  std::int64_t frame_ = 0;
  double cycles_ = 0.0;            // of L1 since the begin
  std::array<double, 3> volts_{};  // r.m.s. at `frame_`, scripted changes apart
  std::vector<WhiteNoise> noise_;  // a phase each
};

}  // namespace tramline::acquire
