#include "config/meter_register.hpp"

#include <gtest/gtest.h>

#include <array>
#include <string>
#include <vector>

namespace tramline::config {
namespace {

TEST(MeterRegister, ReadsTableAddressAndType) {
  const auto found = parse_meter_register("holding:4:u32-swapped");
  ASSERT_TRUE(found);
  EXPECT_EQ(found.value().table, MeterRegister::Table::holding);
  EXPECT_EQ(found.value().address, 4);
  EXPECT_EQ(found.value().type, MeterRegister::Type::u32);
  EXPECT_TRUE(found.value().swapped);
  EXPECT_EQ(found.value().words(), 2);
}

TEST(MeterRegister, RefusesEveryOtherText) {
  for (const std::string text :
       {"", "100", "input:100", "coil:1:u16", "input::u16", "input:65536:u16", "input:-1:u16", "input:1 :u16",
        "input:1:u8", "input:1:u16-swapped", "input:65535:f32", "input:1:u16:", "input:1:", "INPUT:1:u16"}) {
    EXPECT_FALSE(parse_meter_register(text)) << text;
  }
}

TEST(MeterRegister, MakesValuesOfRegisters) {
  struct Row {
    std::string text;
    std::array<std::uint16_t, 2> registers;
    double value;
  };
  // IEEE 754 single: 230.5 is 0x43668000, -1 is 0xBF800000.
  const std::vector<Row> rows = {
      {"input:0:u16", {2305, 0}, 2305.0},
      {"input:0:u16", {65535, 0}, 65535.0},
      {"input:0:s16", {65535, 0}, -1.0},
      {"input:0:u32", {0x0001, 0x0000}, 65536.0},
      {"input:0:u32-swapped", {0x0001, 0x0000}, 1.0},
      {"input:0:s32", {0xFFFF, 0xFFFE}, -2.0},
      {"input:0:f32", {0x4366, 0x8000}, 230.5},
      {"input:0:f32-swapped", {0x8000, 0x4366}, 230.5},
      {"input:0:f32", {0xBF80, 0x0000}, -1.0},
  };
  for (const Row& row : rows) {
    const auto found = parse_meter_register(row.text);
    ASSERT_TRUE(found) << row.text;
    EXPECT_EQ(found.value().value(row.registers.data()), row.value) << row.text;
  }
}

}  // namespace
}  // namespace tramline::config
