#include "config/nearest_word.hpp"

#include <gtest/gtest.h>

#include <string>

namespace tramline::config {
namespace {

const std::vector<std::string_view> kKeys = {"sag_pct", "swell_pct", "interruption_pct", "hysteresis_pct",
                                             "name"};

TEST(NearestWord, FindsSlipsOfThePen) {
  EXPECT_EQ(nearest_word("sag_pc", kKeys), "sag_pct");        // one left out
  EXPECT_EQ(nearest_word("swel_pct", kKeys), "swell_pct");    // one left out inside
  EXPECT_EQ(nearest_word("swell_pctt", kKeys), "swell_pct");  // one too many
  EXPECT_EQ(nearest_word("nmae", kKeys), "name");             // neighbours swapped
  EXPECT_EQ(nearest_word("hystaresis_pct", kKeys), "hysteresis_pct");
  EXPECT_EQ(nearest_word("SAG_PCT", kKeys), "sag_pct");
}

TEST(NearestWord, FindsAKeyWithoutItsUnit) {
  EXPECT_EQ(nearest_word("interruption", kKeys), "interruption_pct");
  EXPECT_EQ(nearest_word("name_of_the_site", kKeys), "name");
}

TEST(NearestWord, StaysSilentWhenNothingIsNear) {
  EXPECT_EQ(nearest_word("colour", kKeys), "");
  EXPECT_EQ(nearest_word("", kKeys), "");
  EXPECT_EQ(nearest_word("x", {}), "");
  EXPECT_EQ(nearest_word(std::string(100'000, 'x'), kKeys), "");
  EXPECT_EQ(
      nearest_word(
          "x", {std::string_view("a_key_that_is_so_long_that_nobody_would_ever_write_it_down_in_any_file")}),
      "");
}

}  // namespace
}  // namespace tramline::config
