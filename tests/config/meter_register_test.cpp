#include "config/meter_register.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <cstdint>
#include <string>
#include <vector>

namespace tramline::config {
namespace {

using Table = MeterRegister::Table;
using Type = MeterRegister::Type;

TEST(MeterRegister, IsReadFromItsText) {
  struct Row {
    const char* text;
    Table table;
    std::uint16_t address;
    Type type;
    bool swapped;
    int words;
  };
  const std::vector<Row> rows = {
      {"input:0:f32", Table::input, 0, Type::f32, false, 2},
      {"input:0:f32-swapped", Table::input, 0, Type::f32, true, 2},
      {"holding:100:u16", Table::holding, 100, Type::u16, false, 1},
      {"holding:65535:s16", Table::holding, 65'535, Type::s16, false, 1},
      {"holding:65534:u32", Table::holding, 65'534, Type::u32, false, 2},
      {"holding:4:u32-swapped", Table::holding, 4, Type::u32, true, 2},
      {"input:7:s32", Table::input, 7, Type::s32, false, 2},
      {"input:7:s32-swapped", Table::input, 7, Type::s32, true, 2},
  };
  for (const Row& row : rows) {
    SCOPED_TRACE(row.text);
    const auto found = parse_meter_register(row.text);
    ASSERT_TRUE(found.ok()) << found.error().text();
    EXPECT_EQ(found.value().table, row.table);
    EXPECT_EQ(found.value().address, row.address);
    EXPECT_EQ(found.value().type, row.type);
    EXPECT_EQ(found.value().swapped, row.swapped);
    EXPECT_EQ(found.value().words(), row.words);
  }
}

TEST(MeterRegister, RefusesWhatNamesNoRegisterAndSaysWhy) {
  struct Row {
    const char* text;
    const char* why;
  };
  const std::vector<Row> rows = {
      {"", "it names no register"},
      {"3", "it is not of the form TABLE:ADDRESS:TYPE"},
      {"input", "it is not of the form TABLE:ADDRESS:TYPE"},
      {"input:0", "it is not of the form TABLE:ADDRESS:TYPE"},
      {"coil:0:u16", "\"coil\" is no table"},
      {"Input:0:u16", "\"Input\" is no table"},
      {":0:u16", "\"\" is no table"},
      {"input::u16", "\"\" is no address"},
      {"input:-1:u16", "\"-1\" is no address"},
      {"input:+1:u16", "\"+1\" is no address"},
      {"input: 1:u16", "\" 1\" is no address"},
      {"input:1 :u16", "\"1 \" is no address"},
      {"input:0x10:u16", "\"0x10\" is no address"},
      {"input:1.5:u16", "\"1.5\" is no address"},
      {"input:65536:u16", "\"65536\" is no address"},
      {"input:99999999999999999999:u16", "\"99999999999999999999\" is no address"},
      {"input:0:", "\"\" is no type"},
      {"input:0:f64", "\"f64\" is no type"},
      {"input:0:F32", "\"F32\" is no type"},
      {"input:0:f32:2", "\"f32:2\" is no type"},
      {"input:0:-swapped", "\"\" is no type"},
      {"input:0:f32-swapped-swapped", "\"f32-swapped\" is no type"},
      {"input:0:u16-swapped", "one register has no halves to swap"},
      {"input:0:s16-swapped", "one register has no halves to swap"},
      {"input:65535:u32", "two registers do not fit at 65535"},
      {"holding:65535:f32-swapped", "two registers do not fit at 65535"},
  };
  for (const Row& row : rows) {
    SCOPED_TRACE(row.text);
    const auto found = parse_meter_register(row.text);
    ASSERT_FALSE(found.ok());
    EXPECT_EQ(found.error().what, row.why);
    EXPECT_NE(found.error().remedy.find("TABLE:ADDRESS:TYPE"), std::string::npos);
  }
}

TEST(MeterRegister, TextWithAZeroByteInsideIsRefused) {
  EXPECT_FALSE(parse_meter_register(std::string_view("input:0\0:u16", 12)).ok());
  EXPECT_FALSE(parse_meter_register(std::string_view("input:0:u16\0", 12)).ok());
}

TEST(MeterRegister, GivesTheValueOfItsRegisters) {
  struct Row {
    const char* text;
    std::vector<std::uint16_t> registers;
    double value;
    const char* source;
  };
  const std::vector<Row> rows = {
      {"input:0:u16", {0x0000}, 0.0, "binary"},
      {"input:0:u16", {0xFFFF}, 65'535.0, "binary"},
      {"input:0:u16", {0x8000}, 32'768.0, "binary"},
      // Modbus application protocol 1.1b3, 6.3, the worked answer: register 108 holds 02 2B, 555 in decimal
      // (from memory).
      {"holding:107:u16", {0x022B}, 555.0, "Modbus 6.3"},
      {"input:0:s16", {0x7FFF}, 32'767.0, "two's complement"},
      {"input:0:s16", {0x8000}, -32'768.0, "two's complement"},
      {"input:0:s16", {0xFFFF}, -1.0, "two's complement"},
      {"input:0:u32", {0x0001, 0x0000}, 65'536.0, "more significant first"},
      {"input:0:u32", {0xFFFF, 0xFFFF}, 4'294'967'295.0, "binary"},
      {"input:0:u32", {0x0003, 0x8270}, 230'000.0, "230 V in mV: 3 * 65536 + 33392"},
      {"input:0:u32-swapped", {0x8270, 0x0003}, 230'000.0, "halves exchanged"},
      {"input:0:s32", {0x7FFF, 0xFFFF}, 2'147'483'647.0, "two's complement"},
      {"input:0:s32", {0x8000, 0x0000}, -2'147'483'648.0, "two's complement"},
      {"input:0:s32", {0xFFFF, 0xFFFE}, -2.0, "two's complement"},
      {"input:0:s32-swapped", {0xFFFE, 0xFFFF}, -2.0, "halves exchanged"},
      // IEEE 754 binary32: sign 1 bit, exponent 8 bits with bias 127, fraction 23 bits.
      {"input:0:f32", {0x3F80, 0x0000}, 1.0, "exponent 127, fraction 0"},
      {"input:0:f32", {0xC000, 0x0000}, -2.0, "sign, exponent 128"},
      {"input:0:f32", {0x4366, 0x0000}, 230.0, "2^7 * (1 + 102/128)"},
      {"input:0:f32", {0x4366, 0x8000}, 230.5, "2^7 * (1 + 102.5/128)"},
      {"input:0:f32-swapped", {0x0000, 0x4366}, 230.0, "halves exchanged"},
      {"input:0:f32", {0x0000, 0x0001}, 0x1p-149, "the smallest there is"},
      {"input:0:f32", {0x7F7F, 0xFFFF}, 0x1.fffffep127, "the largest there is"},
      {"input:0:f32", {0x0000, 0x0000}, 0.0, "zero"},
  };
  for (const Row& row : rows) {
    SCOPED_TRACE(std::string(row.text) + ", " + row.source);
    const auto found = parse_meter_register(row.text);
    ASSERT_TRUE(found.ok());
    ASSERT_EQ(static_cast<std::size_t>(found.value().words()), row.registers.size());
    EXPECT_EQ(found.value().value(row.registers.data()), row.value);
  }
}

TEST(MeterRegister, GivesWhatIsNoNumberAsNoNumber) {
  const auto found = parse_meter_register("input:0:f32");
  ASSERT_TRUE(found.ok());
  const std::uint16_t nan[] = {0x7FC0, 0x0000};
  const std::uint16_t infinity[] = {0x7F80, 0x0000};
  EXPECT_TRUE(std::isnan(found.value().value(nan)));
  EXPECT_TRUE(std::isinf(found.value().value(infinity)));
}

}  // namespace
}  // namespace tramline::config
