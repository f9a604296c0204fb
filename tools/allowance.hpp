#pragma once

#include <string_view>

/// What may be said of a measured value and a limit, allowing for the uncertainty of the measurement: both
/// ways a guard band as wide as the expanded uncertainty (in the spirit of JCGM 106:2012, clause 8).
namespace tramline::tools {

enum class Limit { lower, upper };

enum class Allowance {
  outside,    ///< beyond the limit, even allowing for the uncertainty
  undecided,  ///< nearer to the limit than the uncertainty
  inside,     ///< within the limit, even allowing for the uncertainty
};

/// `expanded` is the expanded uncertainty of `value`; all three in one unit. A value or an uncertainty that
/// is not known (NaN), or an uncertainty below zero, leaves it undecided.
[[nodiscard]] constexpr Allowance allowance(double value, double limit, Limit which, double expanded) {
  const double beyond = which == Limit::lower ? limit - value : value - limit;
  if (!(expanded >= 0.0)) return Allowance::undecided;
  if (beyond > expanded) return Allowance::outside;
  if (beyond < -expanded || (expanded == 0.0 && beyond <= 0.0)) return Allowance::inside;
  return Allowance::undecided;
}

/// For people.
[[nodiscard]] constexpr std::string_view words_for(Allowance allowance) {
  switch (allowance) {
    case Allowance::outside:
      return "outside, even allowing for the uncertainty";
    case Allowance::inside:
      return "inside, even allowing for the uncertainty";
    case Allowance::undecided:
      break;
  }
  return "cannot be decided: nearer to the limit than the uncertainty";
}

/// For programs: "outside", "undecided", "inside".
[[nodiscard]] constexpr std::string_view name_of(Allowance allowance) {
  return allowance == Allowance::outside  ? "outside"
         : allowance == Allowance::inside ? "inside"
                                          : "undecided";
}

}  // namespace tramline::tools
