#include "tools/words.hpp"

#include <spdlog/fmt/fmt.h>

#include <cmath>

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

}  // namespace tramline::tools
