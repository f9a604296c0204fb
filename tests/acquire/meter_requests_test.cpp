#include "daemon/acquire/meter_requests.hpp"

#include <gtest/gtest.h>

#include <string>
#include <vector>

namespace tramline::acquire {
namespace {

using Table = config::MeterRegister::Table;

/// "holding 100 3: 0 2" for each request.
std::vector<std::string> plan(const std::vector<std::string>& texts, int most_words = 120) {
  std::vector<config::MeterRegister> wanted;
  for (const std::string& text : texts) {
    const auto found = config::parse_meter_register(text);
    EXPECT_TRUE(found.ok()) << text;
    if (found) wanted.push_back(found.value());
  }
  std::vector<std::string> lines;
  for (const MeterRequest& request : requests_for(wanted, most_words)) {
    std::string line = (request.table == Table::holding ? "holding " : "input ") +
                       std::to_string(request.address) + " " + std::to_string(request.words) + ":";
    for (const std::size_t one : request.registers)
      line += " " + std::to_string(one);
    lines.push_back(line);
  }
  return lines;
}

using Lines = std::vector<std::string>;

TEST(MeterRequests, RegistersThatTouchAreAskedForTogether) {
  EXPECT_EQ(plan({"input:0:f32", "input:2:f32", "input:4:u16"}), Lines({"input 0 5: 0 1 2"}));
}

TEST(MeterRequests, WhatLiesBetweenIsNotAskedFor) {
  EXPECT_EQ(plan({"input:0:f32", "input:3:f32"}), Lines({"input 0 2: 0", "input 3 2: 1"}));
}

TEST(MeterRequests, TablesAreAskedForApart) {
  EXPECT_EQ(plan({"input:0:u16", "holding:1:u16"}), Lines({"holding 1 1: 1", "input 0 1: 0"}));
}

TEST(MeterRequests, TheOrderOfAskingIsThatOfAddresses) {
  EXPECT_EQ(plan({"input:4:f32", "input:0:f32", "input:2:f32", "input:40:u16"}),
            Lines({"input 0 6: 1 2 0", "input 40 1: 3"}));
}

TEST(MeterRequests, RegistersThatOverlapAreAskedForOnce) {
  EXPECT_EQ(plan({"input:0:u32", "input:0:f32", "input:1:u16", "input:1:u32"}),
            Lines({"input 0 3: 0 1 2 3"}));
  EXPECT_EQ(plan({"input:0:u32", "input:0:u16"}), Lines({"input 0 2: 0 1"}));
}

TEST(MeterRequests, ARequestIsNoLongerThanItMayBe) {
  EXPECT_EQ(plan({"input:0:f32", "input:2:f32", "input:4:f32"}, 4),
            Lines({"input 0 4: 0 1", "input 4 2: 2"}));
  EXPECT_EQ(plan({"input:0:f32", "input:2:f32", "input:4:f32"}, 5),
            Lines({"input 0 4: 0 1", "input 4 2: 2"}));
  EXPECT_EQ(plan({"input:0:f32", "input:2:f32"}, 2), Lines({"input 0 2: 0", "input 2 2: 1"}));
}

TEST(MeterRequests, TheLastRegisterOfATableCanBeAskedFor) {
  EXPECT_EQ(plan({"input:65535:u16", "input:65533:f32"}), Lines({"input 65533 3: 1 0"}));
}

}  // namespace
}  // namespace tramline::acquire
