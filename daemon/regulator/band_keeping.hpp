#pragma once

#include <cstdint>
#include <optional>

#include "config/site.hpp"
#include "daemon/measure/half_cycle.hpp"
#include "daemon/regulator/half_cycle_pair.hpp"
#include "storage/records.hpp"

namespace tramline::regulator {

/// Counts, for each 10 minutes of UTC and one phase, how the half-cycle values stood to the band, and sums up
/// what the servo did. One phase, one thread; allocates nothing.
class BandKeeping {
 public:
  BandKeeping(Phase phase, const config::Site& site);

  /// Takes a half-cycle value of this phase, of either side. Gives the interval that has ended before it, if
  /// any.
  [[nodiscard]] std::optional<storage::RegulatorInterval> take(const measure::HalfCycle& half_cycle);
  void take(const HalfCyclePair& pair);
  void take(const storage::Correction& correction, bool reversal);

  /// No more will come: the interval in progress.
  [[nodiscard]] std::optional<storage::RegulatorInterval> close();

 private:
  [[nodiscard]] storage::RegulatorInterval finished() const;

  Phase phase_;
  config::Site::Band band_;
  double correctable_low_v_;  // inputs that the ratio range can bring into the band
  double correctable_high_v_;

  std::optional<std::int64_t> number_;  // of the interval since 1970
  storage::RegulatorInterval counts_;
  double ratio_sum_ = 0.0;
  double speed_sum_ = 0.0;
  std::int64_t input_ns_ = 0;  // time that the counted values cover
  std::int64_t output_ns_ = 0;
};

}  // namespace tramline::regulator
