#include "tools/interview.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <sstream>

namespace tramline::tools {
namespace {

using ::testing::HasSubstr;

TEST(Interview, AsksAgainUntilTheAnswerCanBeUnderstood) {
  std::istringstream in("abc\n-3\n500\n 230.5 \n");
  std::ostringstream out;
  Interview interview(in, out);
  EXPECT_EQ(interview.number("Volts", 0.0, 1.0, 400.0), 230.5);
  EXPECT_THAT(out.str(), HasSubstr("A number from 1 to 400 is needed."));
  EXPECT_FALSE(interview.ended());
}

TEST(Interview, AnEmptyLineTakesWhatIsOffered) {
  std::istringstream in("\n\n\n\n\n");
  std::ostringstream out;
  Interview interview(in, out);
  EXPECT_EQ(interview.text("Zone", "UTC"), "UTC");
  EXPECT_EQ(interview.number("Volts", 230.0, 1.0, 400.0), 230.0);
  EXPECT_TRUE(interview.yes("Sure", true));
  EXPECT_EQ(interview.choice("Which", {"a", "b"}, 1), 1U);
  EXPECT_EQ(interview.number_or_none("Speed", 1.0, 2.0), std::nullopt);
}

TEST(Interview, RangesAreTwoNumbersTheLowerFirst) {
  std::istringstream in("170\n270 170\n170-270\n90 , 110\n");
  std::ostringstream out;
  Interview interview(in, out);
  EXPECT_EQ(interview.range("Input"), (std::pair<double, double>{170.0, 270.0}));
  EXPECT_THAT(out.str(), HasSubstr("the lower first"));
}

TEST(Interview, AnswerThatIsWrongIsToldWhy) {
  std::istringstream in("Nowhere\n\nAsia/Kolkata\n");
  std::ostringstream out;
  Interview interview(in, out);
  EXPECT_EQ(
      interview.text("Zone", "", [](const std::string& z) { return z == "Nowhere" ? "No such zone." : ""; }),
      "Asia/Kolkata");
  EXPECT_THAT(out.str(), HasSubstr("No such zone."));
  EXPECT_THAT(out.str(), HasSubstr("An answer is needed."));
}

TEST(Interview, EndOfTheInputEndsEveryQuestion) {
  std::istringstream in;
  std::ostringstream out;
  Interview interview(in, out);
  EXPECT_EQ(interview.text("Name", ""), "");
  EXPECT_TRUE(interview.ended());
  EXPECT_EQ(interview.number("Volts", 0.0, 1.0, 400.0), 0.0);
  EXPECT_EQ(interview.range("Input"), (std::pair<double, double>{0.0, 0.0}));
  EXPECT_FALSE(interview.yes("Sure", false));
  EXPECT_EQ(interview.choice("Which", {"a", "b"}, 0), 0U);
}

}  // namespace
}  // namespace tramline::tools
