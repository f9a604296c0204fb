#pragma once

#include <cstdint>
#include <string>

#include "config/site.hpp"
#include "daemon/regulator/half_cycle_pair.hpp"
#include "storage/records.hpp"

namespace tramline::regulator {

/// What both sides and the ratio did while the output was out of its limits: the evidence for its origin.
struct ExcursionFigures {
  double input_low_v = storage::kNotMeasured;
  double input_high_v = storage::kNotMeasured;
  double ratio_low = storage::kNotMeasured;
  double ratio_high = storage::kNotMeasured;
  /// At the half cycle furthest from the target.
  double worst_output_v = storage::kNotMeasured;
  double worst_input_v = storage::kNotMeasured;
  double worst_ratio = storage::kNotMeasured;
  /// Time out of band, by what held it there.
  std::int64_t supply_ns = 0;     ///< the ideal servo would have been out of band as well
  std::int64_t regulator_ns = 0;  ///< the ideal servo would have been in band
  std::int64_t unknown_ns = 0;    ///< the input is not measured
  /// The part of `supply_ns` in which even the end of the ratio's range would not have reached the band.
  std::int64_t beyond_range_ns = 0;

  /// Adds one half cycle. `ideal_in_band`: whether the ideal servo's output is in band there; ignored without
  /// an input.
  void take(const HalfCyclePair& pair, const config::Site& site, bool ideal_in_band);
};

struct Judgement {
  storage::Origin origin = storage::Origin::undecided;
  std::string reason;  ///< one sentence, with figures
};

/// Who is to blame for an excursion with these figures.
///
/// `supply` if for the larger part of the time out of band an ideal servo of the declared range and speed
/// would have been out of band too; `regulator` if it would have been in band; `undecided` if the input is
/// not measured for the larger part.
[[nodiscard]] Judgement judge(const ExcursionFigures& figures, const config::Site& site);

}  // namespace tramline::regulator
