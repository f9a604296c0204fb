#include "tools/line_fit.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <limits>
#include <vector>

namespace tramline::tools {
namespace {

/// A thermometer's corrections: JCGM 100:2008, H.3, table H.6. Recalled without the document (`from memory`),
/// but the results below follow from them and from nothing else.
std::vector<FitPoint> thermometer() {
  return {{21.521, -0.171}, {22.012, -0.169}, {22.512, -0.166}, {23.003, -0.159},
          {23.507, -0.164}, {23.999, -0.165}, {24.513, -0.156}, {25.002, -0.157},
          {25.503, -0.159}, {26.010, -0.161}, {26.511, -0.160}};
}

TEST(LineFit, GivesTheResultsOfTheGumsThermometer) {
  const auto line = fit_line(thermometer(), 20.0);
  ASSERT_TRUE(line);
  EXPECT_NEAR(line->intercept, -0.1712, 5e-5);  // JCGM 100:2008, H.3.3, from memory, and so are the next
  EXPECT_NEAR(line->u_intercept, 0.0029, 5e-5);
  EXPECT_NEAR(line->slope, 0.00218, 5e-6);
  EXPECT_NEAR(line->u_slope, 0.00067, 5e-6);
  EXPECT_NEAR(line->correlation, -0.930, 5e-4);
  EXPECT_NEAR(line->residual, 0.0035, 5e-5);
  EXPECT_NEAR(line->at(30.0), -0.1494, 5e-5);  // H.3.4
  EXPECT_NEAR(line->u_at(30.0), 0.0041, 5e-5);
  EXPECT_EQ(line->degrees_of_freedom, 9U);
}

TEST(LineFit, AgreesWithNumPyToTheLastDigits) {
  // numpy.polyfit(t - 20, b, 1, cov=True), NumPy 1.24
  const auto line = fit_line(thermometer(), 20.0);
  ASSERT_TRUE(line);
  EXPECT_NEAR(line->intercept, -0.17120379, 5e-9);
  EXPECT_NEAR(line->slope, 0.0021827, 5e-8);
  EXPECT_NEAR(line->u_intercept, 0.0028776, 5e-8);
  EXPECT_NEAR(line->u_slope, 0.00066794, 5e-9);
  EXPECT_NEAR(line->correlation, -0.9304296030934459, 1e-10);
  EXPECT_NEAR(line->residual, 0.0034975639635052877, 1e-12);
  EXPECT_NEAR(line->u_at(10.0 + 20.0), 0.004138595752854942, 1e-12);
}

TEST(LineFit, DoesNotDependOnWhereTheInterceptIsTaken) {
  const auto here = fit_line(thermometer(), 20.0);
  const auto there = fit_line(thermometer(), 24.0);
  ASSERT_TRUE(here && there);
  EXPECT_NEAR(here->at(30.0), there->at(30.0), 1e-12);
  EXPECT_NEAR(here->u_at(30.0), there->u_at(30.0), 1e-12);
  EXPECT_LT(std::abs(there->correlation), 0.1);  // near the mean the two parameters are nearly uncorrelated
}

TEST(LineFit, WeightedTakesTheStatedUncertainties) {
  // numpy.polyfit(x, y, 1, w=1/u, cov='unscaled'), NumPy 1.24
  const std::vector<FitPoint> points = {{100.0, 101.1, 0.1},
                                        {150.0, 151.2, 0.2},
                                        {200.0, 202.3, 0.3},
                                        {230.0, 232.0, 0.1},
                                        {260.0, 262.9, 0.5}};
  const auto line = fit_line_weighted(points);
  ASSERT_TRUE(line);
  EXPECT_NEAR(line->slope, 1.00753342, 5e-9);
  EXPECT_NEAR(line->intercept, 0.31538192, 5e-9);
  EXPECT_NEAR(line->u_slope, 0.00105427, 5e-9);
  EXPECT_NEAR(line->u_intercept, 0.18716265, 5e-9);
  EXPECT_NEAR(line->correlation, -0.9386740078216986, 1e-10);
}

TEST(LineFit, ThroughZeroAgreesWithNumPy) {
  const auto fit = fit_proportion(
      std::vector<FitPoint>{{100.0, 101.1}, {150.0, 151.2}, {200.0, 202.3}, {230.0, 232.0}, {260.0, 262.9}});
  ASSERT_TRUE(fit);
  EXPECT_NEAR(fit->slope, 1.0101761658031088, 1e-12);
  EXPECT_NEAR(fit->residual, 0.3016663565490516, 1e-10);
  EXPECT_NEAR(fit->u_slope, 0.0006866702366148861, 1e-12);
  EXPECT_EQ(fit->degrees_of_freedom, 4U);
}

TEST(LineFit, SaysNothingOfAScatterItHasNotSeen) {
  const auto line = fit_line(std::vector<FitPoint>{{1.0, 2.0}, {2.0, 3.0}});
  ASSERT_TRUE(line);
  EXPECT_DOUBLE_EQ(line->at(3.0), 4.0);
  EXPECT_TRUE(std::isnan(line->u_slope));
  EXPECT_TRUE(std::isnan(line->u_at(3.0)));
  const auto proportion = fit_proportion(std::vector<FitPoint>{{2.0, 3.0}});
  ASSERT_TRUE(proportion);
  EXPECT_DOUBLE_EQ(proportion->slope, 1.5);
  EXPECT_TRUE(std::isnan(proportion->u_slope));
}

TEST(LineFit, RefusesPointsThatMakeNoLine) {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  EXPECT_FALSE(fit_line(std::vector<FitPoint>{}));
  EXPECT_FALSE(fit_line(std::vector<FitPoint>{{1.0, 2.0}}));
  EXPECT_FALSE(fit_line(std::vector<FitPoint>{{1.0, 2.0}, {1.0, 3.0}}));
  // A tenth has no exact binary form: its mean over three must not look like a spread of x.
  EXPECT_FALSE(fit_line(std::vector<FitPoint>{{0.1, 2.0}, {0.1, 3.0}, {0.1, 4.0}}));
  EXPECT_FALSE(fit_line(std::vector<FitPoint>{{1.0, nan}, {2.0, 3.0}}));
  EXPECT_FALSE(fit_line_weighted(std::vector<FitPoint>{{1.0, 2.0, 0.1}, {2.0, 3.0, 0.0}}));
  EXPECT_FALSE(fit_proportion(std::vector<FitPoint>{}));
  EXPECT_FALSE(fit_proportion(std::vector<FitPoint>{{0.0, 1.0}}));
  EXPECT_FALSE(fit_proportion(std::vector<FitPoint>{{nan, 1.0}}));
}

}  // namespace
}  // namespace tramline::tools
