#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "config/units.hpp"
#include "storage/records.hpp"

/// The words in which the tool speaks of sides, events and origins, in one place.
namespace tramline::tools {

[[nodiscard]] std::string_view name_of(storage::EventKind kind);  ///< "sag", "out of band"
[[nodiscard]] std::string_view name_of(storage::Origin origin);
[[nodiscard]] std::string_view name_of(storage::EventEnd end);
[[nodiscard]] std::string_view name_of(storage::ClockTrust trust);  ///< "synchronised"
using tramline::name_of;

[[nodiscard]] std::string side_text(Side side);                   ///< "supply (input)"
[[nodiscard]] std::string volts_text(double volts);               ///< "257.4 V"; "not measured"
[[nodiscard]] std::string share_text(double part, double whole);  ///< "98.3 %"; "not measured" of nothing
[[nodiscard]] std::string phases_text(std::uint8_t phases);       ///< "L1 L3"

/// What cannot be seen in readings of r.m.s. so far apart, for part of the period or all of it.
[[nodiscard]] std::string readings_text(std::int64_t every_ns, bool all_of_it);
/// What is known of the clock by which the aggregates were placed in time, as a sentence; empty if there are
/// none.
[[nodiscard]] std::string clock_text(const std::vector<storage::Aggregate>& aggregates);

}  // namespace tramline::tools
