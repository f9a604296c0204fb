#pragma once

#include <cstdint>
#include <optional>

#include "config/site.hpp"
#include "daemon/regulator/half_cycle_pair.hpp"
#include "storage/records.hpp"

namespace tramline::regulator {

/// Finds the movements of the servo in the ratio of the two voltages.
///
/// The ratio is averaged over two cycles. A movement goes on while each average differs from the one before
/// by more than a quarter of the declared speed would make it (of 8 V/s where none is declared), in one
/// direction; it ends after two averages at rest or with a turn. A change at more than three times the
/// declared speed is no servo and interrupts a movement. Movements of less than 0.3 % of ratio are not
/// counted. One phase, one thread; allocates nothing.
class CorrectionDetector {
 public:
  CorrectionDetector(const config::RegulatorSettings& settings, double nominal_v);

  /// Takes the pairs in order; a pair without ratio ends a movement. Gives the correction that has ended, if
  /// any.
  [[nodiscard]] std::optional<storage::Correction> take(const HalfCyclePair& pair);

  /// Measuring has a hole here: a movement under way ends.
  [[nodiscard]] std::optional<storage::Correction> restart();

  /// Whether the last correction given turned back on the one before, within 10 s.
  [[nodiscard]] bool last_was_reversal() const { return reversal_; }

 private:
  struct Mean {
    double ratio = 0.0;
    double input_v = 0.0;
    measure::SamplePosition at = 0.0;
    UtcNs begin;
    std::int64_t elapsed_ns = 0;
  };
  [[nodiscard]] std::optional<storage::Correction> take(const Mean& mean);
  [[nodiscard]] std::optional<storage::Correction> end_movement();

  double least_ratio_a_second_;
  double most_ratio_a_second_;

  int in_mean_ = 0;
  Mean filling_;
  std::optional<Mean> last_;

  bool moving_ = false;
  int direction_ = 0;
  int at_rest_ = 0;
  Mean from_;
  Mean to_;
  std::optional<storage::Correction> previous_;
  int previous_direction_ = 0;
  bool reversal_ = false;
};

}  // namespace tramline::regulator
