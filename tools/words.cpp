#include "tools/words.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>

#include "config/time_text.hpp"

namespace tramline::tools {

std::string_view name_of(storage::EventKind kind) {
  switch (kind) {
    case storage::EventKind::sag:
      return "sag";
    case storage::EventKind::swell:
      return "swell";
    case storage::EventKind::interruption:
      return "interruption";
    case storage::EventKind::out_of_band:
      break;
  }
  return "out of band";
}

std::string_view name_of(storage::Origin origin) {
  switch (origin) {
    case storage::Origin::supply:
      return "supply";
    case storage::Origin::regulator:
      return "regulator";
    case storage::Origin::undecided:
      return "undecided";
    case storage::Origin::not_judged:
      break;
  }
  return "not judged";
}

std::string_view name_of(storage::ClockTrust trust) {
  switch (trust) {
    case storage::ClockTrust::synchronised:
      return "synchronised";
    case storage::ClockTrust::holdover:
      return "holdover";
    case storage::ClockTrust::never_set:
      break;
  }
  return "never set";
}

std::string_view name_of(storage::EventEnd end) {
  switch (end) {
    case storage::EventEnd::open:
      return "still going on";
    case storage::EventEnd::recovered:
      return "recovered";
    case storage::EventEnd::gap:
      return "cut short by a gap in the samples";
    case storage::EventEnd::stopped:
      return "cut short when measuring was stopped";
    case storage::EventEnd::cut_off:
      break;
  }
  return "cut short when the logger stopped without notice";
}

std::string side_text(Side side) {
  return side == Side::input ? "supply (input)" : "load (output)";
}

std::string volts_text(double volts) {
  if (std::isnan(volts)) return "not measured";
  return fmt::format("{:.1f} V", volts);
}

std::string share_text(double part, double whole) {
  if (!(whole > 0.0)) return "not measured";
  const double pct = 100.0 * part / whole;
  // Never rounded up to all or down to nothing.
  if (part < whole && pct > 99.995) return "over 99.99 %";
  if (part > 0.0 && pct < 0.005) return "under 0.01 %";
  return fmt::format("{:.2f} %", pct);
}

std::string phases_text(std::uint8_t phases) {
  std::string text;
  for (unsigned p = 0; p < 3; ++p) {
    if ((phases >> p & 1U) == 0) continue;
    if (!text.empty()) text += ' ';
    text += name_of(static_cast<Phase>(p));
  }
  return text;
}

std::string readings_text(std::int64_t every_ns, bool all_of_it) {
  return fmt::format(
      "{}r.m.s. readings of a meter every {} were taken: a sag or swell shorter than that, or than the "
      "meter's "
      "own averaging, cannot be seen in them, and an event's begin and end are as coarse.",
      all_of_it ? "Only " : "In part of the period only ", config::format_duration(every_ns));
}

std::string clock_text(const std::vector<storage::Aggregate>& aggregates) {
  if (aggregates.empty()) return "";
  std::size_t unknown = 0;
  std::size_t holdover = 0;
  std::int64_t bound_ns = 0;
  for (const storage::Aggregate& aggregate : aggregates) {
    unknown += aggregate.clock.trust == storage::ClockTrust::never_set ? 1U : 0U;
    holdover += aggregate.clock.trust == storage::ClockTrust::holdover ? 1U : 0U;
    bound_ns = std::max(bound_ns, aggregate.clock.error_bound_ns);
  }
  if (unknown > 0) {
    return fmt::format("Clock: for {} nothing is known of its error; times may be wrong, durations are not.",
                       unknown == aggregates.size() ? "the whole period" : "part of the period");
  }
  const std::string within = config::format_duration(bound_ns);
  if (holdover > 0)
    return "Clock: nothing steered it for part of the period; its error stayed within " + within + ".";
  return "Clock: synchronised, its error within " + within + ".";
}

}  // namespace tramline::tools
