#include "tools/svg.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "tools/paragraph.hpp"
#include "tools/words.hpp"

namespace tramline::tools {
namespace {

using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::Not;

TEST(Svg, TextIsEscapedSoThatASiteNameCannotBecomeMarkup) {
  Svg svg(100, 100, "<script>", "a & b");
  svg.text(1, 2, "\"<b>\x01&'");
  const std::string out = std::move(svg).finish();
  EXPECT_THAT(out, Not(HasSubstr("<script>")));
  EXPECT_THAT(out, HasSubstr("&lt;script&gt;"));
  EXPECT_THAT(out, HasSubstr("&quot;&lt;b&gt;&amp;&#39;"));
  EXPECT_EQ(out.find('\x01'), std::string::npos);
}

TEST(AxisTicks, AreRoundFiguresWithinTheRange) {
  EXPECT_THAT(axis_ticks(0.0, 1.0, 5), ElementsAre(0.0, 0.2, 0.4, 0.6000000000000001, 0.8, 1.0));
  EXPECT_THAT(axis_ticks(-350.0, 350.0, 7), ElementsAre(-300.0, -200.0, -100.0, 0.0, 100.0, 200.0, 300.0));
  EXPECT_TRUE(axis_ticks(1.0, 1.0, 5).empty());
}

TEST(Paragraph, LinesBreakAtSpacesAndAreIndented) {
  std::string words;
  for (int i = 0; i < 40; ++i)
    words += "word ";
  const std::string out = indented(words, 3);
  std::size_t begin = 0;
  std::size_t lines = 0;
  while (begin < out.size()) {
    const std::size_t end = out.find('\n', begin);
    EXPECT_LE(end - begin, 96U);
    EXPECT_EQ(out.substr(begin, 7), "   word");
    begin = end + 1;
    ++lines;
  }
  EXPECT_EQ(lines, 3U);
}

TEST(Words, PhasesAreListed) {
  EXPECT_EQ(phases_text(0b101), "L1 L3");
  EXPECT_EQ(phases_text(0), "");
}

}  // namespace
}  // namespace tramline::tools
