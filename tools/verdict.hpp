#pragma once

#include <array>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "config/site.hpp"
#include "storage/records.hpp"
#include "tools/allowance.hpp"
#include "tools/evidence.hpp"

/// Did the regulator hold its band, and if not, who is to blame: from the records to figures, and from those
/// to words.
namespace tramline::tools {

enum class Answer {
  held,          ///< no excursion that counts
  not_held,      ///< at least one
  no_output,     ///< there is no output sensor
  no_regulator,  ///< the site file describes none
  nothing_measured,
};

struct OfOrigin {
  std::int64_t times = 0;
  std::int64_t total_ns = 0;
};

struct Extreme {
  double volts = storage::kNotMeasured;
  UtcNs begin;  ///< of the ten minutes it lies in
  UtcNs end;
};

struct OfSide {
  bool measured = false;
  std::int64_t half_cycles = 0;
  std::int64_t in_band = 0;
  std::int64_t low = 0;  ///< output only
  std::int64_t high = 0;
  Extreme lowest;
  Extreme highest;
  std::array<std::int64_t, 3> events{};  ///< sags, swells, interruptions
  std::int64_t held_off = 0;             ///< input only: events the output did not show
};

/// An excursion's extreme against the edge of the band, allowing for the uncertainty of the sensor.
struct Weighed {
  Limit which = Limit::lower;
  double limit_v = 0.0;
  double expanded_v = 0.0;  ///< expanded uncertainty of the extreme
  Allowance allowance = Allowance::undecided;
};

struct VerdictFigures {
  Answer answer = Answer::nothing_measured;
  config::Site::Band band{};
  UtcNs from;  ///< of the period that the answer speaks of
  UtcNs to;
  std::int64_t span_ns = 0;
  std::int64_t measured_ns = 0;
  std::int64_t gaps = 0;
  std::int64_t longest_gap_ns = 0;
  OfSide input;
  OfSide output;
  std::int64_t excursions = 0;
  std::int64_t excursions_ns = 0;
  std::array<OfOrigin, 4> by_origin{};  ///< by storage::Origin
  std::optional<storage::Event> longest;
  std::optional<storage::Event> worst;     ///< furthest from the target
  std::optional<Weighed> longest_weighed;  ///< absent: its sensor was not calibrated, or there is none
  std::optional<Weighed> worst_weighed;
  std::int64_t pairs = 0;
  std::int64_t correctable = 0;
  std::int64_t corrections = 0;
  std::int64_t reversals = 0;
  double travel = 0.0;
};

/// Figures from evidence. Intervals, events and coverage are those that touch the period; stretches are cut
/// to it.
[[nodiscard]] VerdictFigures verdict_figures(const Evidence& evidence);

/// For people: the answer in a plain sentence first, then the figures.
[[nodiscard]] std::string verdict_text(const Evidence& evidence, const VerdictFigures& figures);

/// For programs: one JSON object, documented in tramline(1).
[[nodiscard]] std::string verdict_json(const Evidence& evidence, const VerdictFigures& figures);

}  // namespace tramline::tools
