#include "tools/calibration_figures.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <limits>
#include <numeric>

#include "config/site.hpp"
#include "tools/calibration_report.hpp"

namespace tramline::tools {
namespace {

using config::CalibrationReading;
using ::testing::Contains;
using ::testing::HasSubstr;
using ::testing::Not;

constexpr auto kAc = CalibrationReading::Kind::ac;
constexpr auto kDc = CalibrationReading::Kind::dc;

SensorReading reading(CalibrationReading::Kind kind, double shown_v, double reference_v) {
  return {{kind, shown_v, reference_v}, {}};
}

/// With a reference of 0.5 % at k = 2.
Comparison comparison(std::vector<SensorReading> readings) {
  Comparison c;
  c.nominal_v = 230.0;
  c.readings = std::move(readings);
  c.reference_expanded_pct = 0.5;
  return c;
}

CalibrationFigures figures(const Comparison& c) {
  const auto found = calibration_figures(c);
  EXPECT_TRUE(found) << (found ? "" : found.error().text());
  return found ? found.value() : CalibrationFigures{};
}

std::string refusal(const Comparison& c) {
  const auto found = calibration_figures(c);
  return found ? "accepted" : found.error().text();
}

std::string remarks(const CalibrationFigures& f) {
  return std::accumulate(f.remarks.begin(), f.remarks.end(), std::string(),
                         [](const std::string& a, const std::string& b) { return a + b + "\n"; });
}

const BudgetLine& line(const CalibrationFigures& f, const std::string& component) {
  for (const BudgetLine& l : f.budget) {
    if (l.component.find(component) != std::string::npos) return l;
  }
  ADD_FAILURE() << "no line " << component;
  static const BudgetLine none;
  return none;
}

TEST(CalibrationFigures, OneReadingGivesTheGainAndSaysThatItsScatterIsNotKnown) {
  const auto f = figures(comparison({reading(kAc, 232.3, 230.0)}));
  EXPECT_NEAR(f.gain, 230.0 / 232.3, 5e-8);
  EXPECT_EQ(f.offset_v, 0.0);
  EXPECT_NEAR(f.readings[0].error_v, 2.3, 1e-9);
  EXPECT_NEAR(f.readings[0].residual_v, 0.0, 1e-9);
  EXPECT_EQ(f.budget.size(), 1U);
  EXPECT_NEAR(f.combined_v, 0.0025 * 230.0, 1e-9);
  EXPECT_NEAR(f.expanded_pct, 0.5, 1e-12);
  EXPECT_EQ(f.expanded_v, 0.0);
  EXPECT_THAT(remarks(f), HasSubstr("Repeatability is not known"));
  EXPECT_THAT(remarks(f), HasSubstr("offset was not determined"));
  EXPECT_FALSE(f.offset_expanded_v);
}

TEST(CalibrationFigures, MoreReadingsDoNotMakeTheReferenceBetter) {
  // Common to all readings, its error does not average out (JCGM 100:2008, F.1.2 and 5.2; from memory).
  const auto one = figures(comparison({reading(kAc, 232.3, 230.0)}));
  std::vector<SensorReading> many;
  for (int i = 0; i < 50; ++i)
    many.push_back(reading(kAc, 232.3, 230.0));
  const auto fifty = figures(comparison(many));
  EXPECT_NEAR(line(fifty, "reference").standard_v, line(one, "reference").standard_v, 1e-9);
  EXPECT_GE(fifty.combined_v, one.combined_v - 1e-12);
}

TEST(CalibrationFigures, TheBudgetAddsItsComponentsAsSquares) {
  Comparison c = comparison({reading(kAc, 231.0, 230.0), reading(kAc, 231.2, 230.0),
                             reading(kAc, 230.9, 230.0), reading(kAc, 231.1, 230.0)});
  c.resolution_v = 0.1;
  c.reference_resolution_v = 0.1;
  c.temperature_coefficient_ppm_per_k = 50.0;
  c.temperature_span_k = 20.0;
  const auto f = figures(c);
  EXPECT_NEAR(line(f, "logger's").standard_v, 0.1 / std::sqrt(12.0) * f.gain, 1e-5);
  EXPECT_NEAR(line(f, "reference's").standard_v, 0.1 / std::sqrt(12.0), 1e-4);
  EXPECT_NEAR(line(f, "temperature").standard_v, 50e-6 * 20.0 / std::sqrt(3.0) * 230.0, 1e-9);
  EXPECT_EQ(line(f, "repeatability").type, 'A');
  // The mean of four readings that scatter by s: s/√4. s of 231.0 231.2 230.9 231.1 is 0.129.
  EXPECT_NEAR(line(f, "repeatability").standard_v, 0.129 / 2.0, 1e-3);
  double squares = 0.0;
  for (const BudgetLine& l : f.budget)
    squares += l.standard_v * l.standard_v;
  EXPECT_NEAR(f.combined_v, std::sqrt(squares), 1e-12);
  EXPECT_NEAR(f.expanded_at_nominal_v, 2.0 * f.combined_v, 0.05 * f.combined_v);
  EXPECT_GE(f.expanded_at_nominal_v, 2.0 * f.combined_v);  // rounded up, never down
}

TEST(CalibrationFigures, AnOffsetIsTakenFromDcReadingsAndOutOfTheAcOnes) {
  // A sensor that reads 1 % high and adds 12 V of d.c.: shown = 1.01 · u + 12.
  const auto shown_rms = [](double v) { return std::hypot(1.01 * v, 12.0); };
  const auto f = figures(comparison({reading(kAc, shown_rms(230.0), 230.0),
                                     reading(kAc, shown_rms(180.0), 180.0), reading(kDc, 12.0, 0.0)}));
  EXPECT_NEAR(f.gain, 1.0 / 1.01, 1e-6);
  EXPECT_NEAR(f.offset_v, -12.0, 1e-4);
  EXPECT_TRUE(f.linear);
  for (const ReadingFigures& r : f.readings)
    EXPECT_NEAR(r.residual_v, 0.0, 1e-6);
  EXPECT_TRUE(f.offset_expanded_v);
  // A d.c. reference other than 0 V says the same.
  const auto other =
      figures(comparison({reading(kAc, shown_rms(230.0), 230.0), reading(kDc, 12.0 + 10.1, 10.0)}));
  EXPECT_NEAR(other.gain, 1.0 / 1.01, 1e-6);
  EXPECT_NEAR(other.offset_v, -12.0, 1e-3);
}

TEST(CalibrationFigures, ComposesWithTheCalibrationInForce) {
  // The sensor's own volts are 1.01 · u + 3; in force are offset -2 and gain 0.98, so that the logger shows
  // (1.01 · u + 1) · 0.98.
  Comparison c =
      comparison({reading(kAc, std::hypot(1.01 * 230.0, 1.0) * 0.98, 230.0), reading(kDc, 0.98, 0.0)});
  c.gain_now = 0.98;
  c.offset_now_v = -2.0;
  const auto f = figures(c);
  EXPECT_NEAR(f.gain, 1.0 / 1.01, 1e-6);
  EXPECT_NEAR(f.offset_v, -3.0, 1e-4);
}

TEST(CalibrationFigures, WithoutADcReadingAnOffsetThatWasDeterminedStays) {
  Comparison c = comparison({reading(kAc, 232.0, 230.0)});
  c.offset_now_v = -1.5;
  c.offset_now_expanded_v = 0.2;
  const auto f = figures(c);
  EXPECT_EQ(f.offset_v, -1.5);
  EXPECT_EQ(f.offset_expanded_v, 0.2);
  EXPECT_THAT(remarks(f), HasSubstr("stays as it was"));
}

TEST(CalibrationFigures, ASensorThatIsNotLinearIsCalledSoAndItsUncertaintyWidened) {
  // shown = u / 1.02 + 3: the line through the readings meets -3.06 V at 0.
  std::vector<SensorReading> readings;
  for (const double v : {160.0, 200.0, 230.0, 260.0})
    readings.push_back(reading(kAc, v / 1.02 + 3.0, v));
  const auto f = figures(comparison(readings));
  EXPECT_FALSE(f.linear);
  EXPECT_THAT(remarks(f), HasSubstr("The sensor is not linear"));
  EXPECT_THAT(remarks(f), HasSubstr("meets -3.06 V"));
  EXPECT_EQ(f.offset_v, 0.0);  // the gain only: an intercept of r.m.s. values is no offset of samples
  double largest = 0.0;
  for (const ReadingFigures& r : f.readings)
    largest = std::max(largest, std::abs(r.residual_v));
  EXPECT_GT(largest, 0.5);
  EXPECT_NEAR(line(f, "non-linearity").standard_v, largest / std::sqrt(3.0), 1e-6);
  EXPECT_FALSE(line(f, "non-linearity").proportional);
  EXPECT_GT(f.expanded_v, 0.0);
}

TEST(CalibrationFigures, AnOffsetThatLooksLikeABendIsNamedAsAPossibleCause) {
  std::vector<SensorReading> readings;
  for (const double v : {150.0, 200.0, 230.0, 260.0})
    readings.push_back(reading(kAc, std::hypot(v, 25.0), v));
  EXPECT_THAT(remarks(figures(comparison(readings))), HasSubstr("would look the same"));
  readings.push_back(reading(kDc, 25.0, 0.0));
  EXPECT_TRUE(figures(comparison(readings)).linear);
}

TEST(CalibrationFigures, AnInterceptWithinTwiceItsUncertaintyIsNoBend) {
  const auto f = figures(comparison({reading(kAc, 160.2, 160.0), reading(kAc, 199.7, 200.0),
                                     reading(kAc, 230.3, 230.0), reading(kAc, 259.8, 260.0)}));
  EXPECT_TRUE(f.linear);
  EXPECT_THAT(remarks(f), Not(HasSubstr("not linear")));
}

TEST(CalibrationFigures, AnInterceptThatMayBeTheReferencesIsNotHeldAgainstTheSensor) {
  std::vector<SensorReading> readings;
  for (const double v : {160.0, 200.0, 230.0, 260.0})
    readings.push_back(reading(kAc, v + 1.0, v));
  Comparison c = comparison(readings);
  EXPECT_FALSE(figures(c).linear);
  c.reference_expanded_pct = 0.0;
  c.reference_expanded_v = 1.2;  // the same volts at every level
  EXPECT_TRUE(figures(c).linear);
}

TEST(CalibrationFigures, OneLevelAndTwoReadingsSayWhatTheyCannotTell) {
  EXPECT_THAT(remarks(figures(comparison({reading(kAc, 231.0, 230.0), reading(kAc, 231.1, 230.2)}))),
              HasSubstr("at one level"));
  EXPECT_THAT(remarks(figures(comparison({reading(kAc, 231.0, 230.0), reading(kAc, 200.5, 200.0)}))),
              HasSubstr("take a third"));
  EXPECT_THAT(remarks(figures(comparison({reading(kAc, 101.0, 100.0)}))), HasSubstr("far from the nominal"));
}

TEST(CalibrationFigures, FewScatteringReadingsAreSaidToCoverLess) {
  Comparison c =
      comparison({reading(kAc, 229.0, 230.0), reading(kAc, 231.5, 230.0), reading(kAc, 231.0, 230.0)});
  c.reference_expanded_pct = 0.02;
  EXPECT_THAT(remarks(figures(c)), HasSubstr("(2 effective degrees of freedom)"));
}

TEST(CalibrationFigures, AMeterOfRmsValuesGetsTheLineItself) {
  std::vector<SensorReading> readings;
  for (const double v : {180.0, 200.0, 230.0, 250.0})
    readings.push_back(reading(kAc, (v + 3.0) / 1.02, v));
  Comparison c = comparison(readings);
  c.rms_only = true;
  const auto f = figures(c);
  EXPECT_NEAR(f.gain, 1.02, 1e-6);
  EXPECT_NEAR(f.offset_v, -3.0 / 1.02, 1e-4);
  EXPECT_THAT(remarks(f), Not(HasSubstr("not linear")));
  for (const ReadingFigures& r : f.readings)
    EXPECT_NEAR(r.residual_v, 0.0, 1e-6);
  // In force is a line already: shown = 1.02 · raw - 3 must come out as no change.
  c.gain_now = f.gain;
  c.offset_now_v = f.offset_v;
  for (SensorReading& r : c.readings)
    r.reading.shown_v = r.reading.reference_v;
  EXPECT_NEAR(figures(c).gain, f.gain, 1e-6);
  EXPECT_NEAR(figures(c).offset_v, f.offset_v, 1e-4);
  c.readings.push_back(reading(kDc, 0.0, 0.0));
  EXPECT_THAT(refusal(c), HasSubstr("no d.c. part"));
}

TEST(CalibrationFigures, AMeterOfRmsValuesNeedsLevelsForALine) {
  Comparison c =
      comparison({reading(kAc, 231.0, 230.0), reading(kAc, 231.6, 230.5), reading(kAc, 230.4, 229.6)});
  c.rms_only = true;
  const auto f = figures(c);
  EXPECT_EQ(f.offset_v, 0.0);
  EXPECT_THAT(remarks(f), HasSubstr("at least 10 %"));
}

TEST(CalibrationFigures, NonsenseIsRefusedWithWhatToDo) {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  EXPECT_THAT(refusal(comparison({})), HasSubstr("no a.c. reading"));
  EXPECT_THAT(refusal(comparison({reading(kDc, 1.0, 0.0)})), HasSubstr("no a.c. reading"));
  EXPECT_THAT(refusal(comparison({reading(kAc, 115.0, 230.0)})),
              HasSubstr("scale in the site file is probably wrong"));
  EXPECT_THAT(refusal(comparison({reading(kAc, 300.0, 230.0)})), HasSubstr("scale in the site file"));
  EXPECT_EQ(refusal(comparison({reading(kAc, 192.0, 230.0)})), "accepted");
  EXPECT_THAT(refusal(comparison({reading(kAc, 0.0, 230.0)})), HasSubstr("greater than 0"));
  EXPECT_THAT(refusal(comparison({reading(kAc, 230.0, -230.0)})), HasSubstr("greater than 0"));
  EXPECT_THAT(refusal(comparison({reading(kAc, nan, 230.0)})), HasSubstr("no pair of voltages"));
  EXPECT_THAT(refusal(comparison({reading(kAc, 230.0, 230.0), reading(kDc, 60.0, 0.0)})),
              HasSubstr("more than 20 %"));
  // 223 typed for 233.
  EXPECT_THAT(refusal(comparison(
                  {reading(kAc, 232.0, 230.0), reading(kAc, 232.2, 230.1), reading(kAc, 232.4, 223.0)})),
              HasSubstr("reading 232.4=223"));
  // The gain in force counts: 0.85 with another 0.9 is too far.
  Comparison c = comparison({reading(kAc, 255.0, 230.0)});
  c.gain_now = 0.85;
  EXPECT_THAT(refusal(c), HasSubstr("further than 20 %"));
  EXPECT_THAT(refusal(comparison(std::vector<SensorReading>(101, reading(kAc, 230.0, 230.0)))),
              HasSubstr("at most 100"));
}

TEST(CalibrationFigures, UncertaintiesAreRoundedUpToTwoDigits) {
  EXPECT_DOUBLE_EQ(rounded_up(1.121), 1.2);
  EXPECT_DOUBLE_EQ(rounded_up(0.0301), 0.031);
  EXPECT_DOUBLE_EQ(rounded_up(0.5), 0.5);
  EXPECT_DOUBLE_EQ(rounded_up(0.51), 0.51);
  EXPECT_DOUBLE_EQ(rounded_up(12.0), 12.0);
  EXPECT_DOUBLE_EQ(rounded_up(123.0), 130.0);
  EXPECT_EQ(rounded_up(0.0), 0.0);
}

TEST(CalibrationReport, TellsErrorsAsFoundTheBudgetAndTheRemarks) {
  const auto f =
      figures(comparison({reading(kAc, 232.3, 230.0), reading(kAc, 232.4, 230.0), reading(kDc, -0.4, 0.0)}));
  config::Site site;
  site.name = "Plant";
  site.nominal_v = 230.0;
  config::ChannelCalibration entry;
  entry.gain = f.gain;
  entry.offset_v = f.offset_v;
  entry.offset_expanded_v = f.offset_expanded_v;
  const std::string text = comparison_text(f, entry, site);
  EXPECT_THAT(text, HasSubstr("Plant, input L1"));
  EXPECT_THAT(text, HasSubstr("+2.300 V +1.00 %"));
  EXPECT_THAT(text, HasSubstr("reference, common to all readings"));
  EXPECT_THAT(text, HasSubstr("Expanded uncertainty (k = 2, about 95 %): ±1.2 V at 230 V"));
  EXPECT_THAT(text, HasSubstr("Note: All readings stand at one level"));
}

}  // namespace
}  // namespace tramline::tools
