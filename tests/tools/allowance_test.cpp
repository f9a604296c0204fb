#include "tools/allowance.hpp"

#include <gtest/gtest.h>

#include <limits>

namespace tramline::tools {
namespace {

TEST(Allowance, LeavesUndecidedWhatIsNearerToTheLimitThanTheUncertainty) {
  struct Case {
    double value;
    double limit;
    Limit which;
    double expanded;
    Allowance wanted;
  };
  const double nan = std::numeric_limits<double>::quiet_NaN();
  for (const Case& c : {
           Case{226.5, 225.0, Limit::upper, 1.0, Allowance::outside},
           Case{225.9, 225.0, Limit::upper, 1.0, Allowance::undecided},
           Case{226.0, 225.0, Limit::upper, 1.0, Allowance::undecided},  // just as far as the uncertainty
           Case{224.1, 225.0, Limit::upper, 1.0, Allowance::undecided},
           Case{223.9, 225.0, Limit::upper, 1.0, Allowance::inside},
           Case{213.9, 215.0, Limit::lower, 1.0, Allowance::outside},
           Case{214.1, 215.0, Limit::lower, 1.0, Allowance::undecided},
           Case{215.9, 215.0, Limit::lower, 1.0, Allowance::undecided},
           Case{216.1, 215.0, Limit::lower, 1.0, Allowance::inside},
           Case{0.0, 215.0, Limit::lower, 1.0, Allowance::outside},
           Case{225.0, 225.0, Limit::upper, 0.0, Allowance::inside},
           Case{225.1, 225.0, Limit::upper, 0.0, Allowance::outside},
           Case{nan, 225.0, Limit::upper, 1.0, Allowance::undecided},
           Case{300.0, 225.0, Limit::upper, nan, Allowance::undecided},
           Case{300.0, 225.0, Limit::upper, -1.0, Allowance::undecided},
       }) {
    EXPECT_EQ(allowance(c.value, c.limit, c.which, c.expanded), c.wanted)
        << c.value << " against " << c.limit << " ± " << c.expanded;
  }
}

}  // namespace
}  // namespace tramline::tools
