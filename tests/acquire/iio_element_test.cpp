#include "daemon/acquire/iio_element.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <algorithm>
#include <array>
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "daemon/acquire/iio_buffer.hpp"

/// Scan elements of libiio, made from a context's description without a device.
/// Formats and layouts: the kernel's documentation of IIO triggered buffers,
/// Documentation/driver-api/iio/buffers.rst and Documentation/ABI/testing/sysfs-bus-iio; values computed by
/// hand from those definitions.
namespace tramline::acquire {
namespace {

using testing::HasSubstr;

/// A device whose channels voltage0, voltage1, … have these formats; none if libiio itself refuses one.
class Described {
 public:
  explicit Described(const std::vector<std::string>& formats) {
    std::string xml =
        R"(<?xml version="1.0" encoding="utf-8"?><!DOCTYPE context [<!ELEMENT context (device)*>)"
        R"(<!ELEMENT device (channel)*><!ELEMENT channel (scan-element?)><!ELEMENT scan-element EMPTY>)"
        R"(<!ATTLIST context name CDATA #REQUIRED><!ATTLIST device id CDATA #REQUIRED>)"
        R"(<!ATTLIST channel id CDATA #REQUIRED type (input|output) #REQUIRED>)"
        R"(<!ATTLIST scan-element index CDATA #REQUIRED format CDATA #REQUIRED>]>)"
        R"(<context name="test"><device id="iio:device0">)";
    for (std::size_t i = 0; i < formats.size(); ++i) {
      std::string format = formats[i];
      if (const auto at = format.find(">>"); at != std::string::npos) format.replace(at, 2, "&gt;&gt;");
      const std::string number = std::to_string(i);
      xml += "<channel id=\"voltage" + number + "\" type=\"input\"><scan-element index=\"" + number +
             "\" format=\"" + format + "\"/></channel>";
    }
    xml += "</device></context>";
    context_.reset(iio_create_xml_context_mem(xml.c_str(), xml.size()));
  }
  [[nodiscard]] const iio_device* device() const {
    return context_ ? iio_context_get_device(context_.get(), 0) : nullptr;
  }
  [[nodiscard]] iio_channel* channel(unsigned i) const { return iio_device_get_channel(device(), i); }

 private:
  IioContext context_;
};

TEST(IioElement, ReadsEveryFormatOfAScan) {
  struct Row {
    const char* format;
    std::vector<std::uint8_t> bytes;
    double count;
  };
  const std::vector<Row> rows = {
      {"le:s12/16>>4", {0xf0, 0x7f}, 2047},
      {"le:s12/16>>4", {0x00, 0x80}, -2048},
      {"le:s12/16>>4", {0x10, 0x00}, 1},
      {"le:s12/16>>4", {0xf0, 0xff}, -1},
      {"le:s12/16>>4", {0x3c, 0xc2}, -989},
      {"be:s24/32>>8", {0x12, 0x34, 0x56, 0x00}, 1193046},
      {"be:s24/32>>8", {0xff, 0xff, 0xfe, 0x7f}, -2},
      // What stands beside the bits is not looked at.
      {"le:s24/32>>0", {0xfe, 0xff, 0xff, 0x55}, -2},
      {"le:u24/32>>0", {0xfe, 0xff, 0xff, 0x55}, 16777214},
      {"le:s14/16>>0", {0xff, 0xdf}, 8191},
      {"be:u12/16>>4", {0xab, 0xcf}, 0xabc},
      {"le:u12/16>>0", {0xbc, 0xfa}, 0xabc},
      {"le:s18/32>>14", {0xff, 0xbf, 0xff, 0xff}, -2},
      {"be:s18/32>>14", {0x80, 0x00, 0x40, 0x00}, -131071},
      {"le:s20/32>>12", {0x00, 0x10, 0x00, 0x80}, -524287},
      {"le:s8/8>>0", {0x80}, -128},
      {"le:u8/8>>0", {0x80}, 128},
      {"le:s7/8>>1", {0x83}, -63},
      {"be:u16/16>>0", {0x80, 0x01}, 32769},
      {"be:s16/16>>0", {0x80, 0x01}, -32767},
      {"le:u32/32>>0", {0x01, 0x00, 0x00, 0x80}, 2147483649.0},
      {"le:s64/64>>0", {0xfe, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff}, -2},
      {"be:u64/64>>0", {0x80, 0, 0, 0, 0, 0, 0, 0}, 9223372036854775808.0},
      {"be:s48/64>>16", {0x80, 0, 0, 0, 0, 0x01, 0xff, 0xff}, -140737488355327.0},
      {"be:s24/24>>0", {0xff, 0xff, 0xfe}, -2},
      // Of several values the first.
      {"le:s16/16X3>>0", {0xfe, 0xff, 0x01, 0x00, 0x02, 0x00}, -2},
      {"be:s24/32X2>>8", {0xff, 0xff, 0xfe, 0x7f, 0x00, 0x00, 0x01, 0x00}, -2},
  };
  for (const Row& row : rows) {
    SCOPED_TRACE(row.format);
    const Described described({row.format});
    const auto element = IioElement::of(described.channel(0), "here");
    ASSERT_TRUE(element.ok());
    std::vector<std::uint8_t> bytes = {0};  // so that the sample stands at an odd place
    bytes.insert(bytes.end(), row.bytes.begin(), row.bytes.end());
    EXPECT_EQ(element.value().count_at(bytes.data() + 1), row.count);
    EXPECT_EQ(element.value().text(), row.format);
    EXPECT_EQ(element.value().bytes(), row.bytes.size());
  }
}

TEST(IioElement, KeepsAllBitsOfATimeStamp) {
  const Described described({"le:s64/64>>0"});
  const auto element = IioElement::of(described.channel(0), "here");
  ASSERT_TRUE(element.ok());
  const std::array<std::uint8_t, 8> bytes = {0x01, 0x23, 0x45, 0x67, 0x89, 0xab, 0xcd, 0x17};
  EXPECT_EQ(element.value().bits_at(bytes.data()), 0x17cdab8967452301);
}

TEST(IioElement, KnowsTheCodesAtItsLimits) {
  struct Row {
    const char* format;
    double lowest;
    double highest;
  };
  for (const Row& row : {Row{"le:s12/16>>4", -2048, 2047}, Row{"le:u12/16>>0", 0, 4095},
                         Row{"be:s24/32>>8", -8388608, 8388607}, Row{"be:u16/16>>0", 0, 65535},
                         Row{"le:s32/32>>0", -2147483648.0, 2147483647.0}, Row{"le:u1/8>>0", 0, 1}}) {
    SCOPED_TRACE(row.format);
    const Described described({row.format});
    const auto element = IioElement::of(described.channel(0), "here");
    ASSERT_TRUE(element.ok());
    EXPECT_EQ(element.value().lowest(), row.lowest);
    EXPECT_EQ(element.value().highest(), row.highest);
  }
}

TEST(IioElement, RefusesFormatsThatNoScanCanHave) {
  for (const char* format : {"le:s0/16>>0", "le:s17/16>>0", "le:s12/16>>5", "le:s12/12>>0", "le:s65/128>>0",
                             "le:s16/16X17>>0", "nonsense", ""}) {
    SCOPED_TRACE(format);
    const Described described({format});
    if (described.device() == nullptr) continue;
    const auto element = IioElement::of(described.channel(0), "here");
    ASSERT_FALSE(element.ok());
    EXPECT_EQ(element.error().where, "here");
    EXPECT_THAT(element.error().what, HasSubstr("format"));
  }
}

TEST(IioElement, StandsInScansAsLongAsTheKernelMakesThem) {
  // Where in a scan each element stands is checked on whole scans in iio_test.py.
  const std::string s16 = "le:s16/16>>0";
  const std::string s32 = "be:s24/32>>8";
  const std::string stamp = "le:s64/64>>0";
  struct Row {
    std::vector<std::string> formats;
    std::vector<unsigned> enabled;
    std::size_t bytes;
  };
  const std::vector<Row> rows = {
      {{s16, s16, s16, stamp}, {0, 1, 2, 3}, 16},
      {{s16, s16, s16, s16, stamp}, {0, 1, 2, 3, 4}, 16},
      {{s16, s16, s16, s16, s16, stamp}, {0, 1, 2, 3, 4, 5}, 24},
      {{s32, s32, s32, s32, s32, s32, stamp}, {0, 1, 2, 3, 4, 5, 6}, 32},
      {{"le:u16/16>>0", "le:u32/32>>0", "le:u32/32>>0", "le:u64/64>>0"}, {0, 1, 2, 3}, 24},
      {{"le:u16/16>>0", "le:u32/32>>0", "le:u32/32>>0", "le:u64/64>>0"}, {0, 3}, 16},
      {{s16, s16, s16}, {0, 2}, 4},
      {{s16, s32}, {0, 1}, 8},
      {{s32, s16}, {0, 1}, 8},
  };
  for (const Row& row : rows) {
    const Described described(row.formats);
    std::size_t longest = 1;
    for (const unsigned i : row.enabled) {
      iio_channel_enable(described.channel(i));
      const auto element = IioElement::of(described.channel(i), "here");
      ASSERT_TRUE(element.ok());
      longest = std::max(longest, element.value().bytes());
    }
    const auto packed = iio_device_get_sample_size(described.device());
    ASSERT_GT(packed, 0);
    EXPECT_EQ(scan_bytes(static_cast<std::size_t>(packed), longest), row.bytes)
        << row.formats.size() << " channels, " << row.enabled.size() << " enabled";
  }
}

TEST(IioScale, TurnsCountsIntoVoltsByAttributesInMillivolts) {
  const IioScale scale{0.805664062, -2048.0};
  EXPECT_NEAR(scale.volts(2047.0), -0.805664e-3, 1e-9);
  EXPECT_NEAR(scale.volts(3500.0), 1169.824e-3, 1e-6);
  EXPECT_EQ(IioScale{}.volts(-3.0), -3.0);  // no attributes: counts
}

}  // namespace
}  // namespace tramline::acquire
