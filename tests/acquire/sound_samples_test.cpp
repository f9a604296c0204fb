#include "daemon/acquire/sound_samples.hpp"

#include <gtest/gtest.h>

#include <cmath>
#include <limits>
#include <string>
#include <string_view>
#include <vector>

#include "tests/acquire/whole_stream.hpp"

namespace tramline::acquire {
namespace {

/// One channel of `hex`.
Arrival decoded(SoundFormat format, std::string_view hex) {
  const std::string text = from_hex(hex);
  const std::vector<std::uint8_t> bytes(text.begin(), text.end());
  Arrival arrival;
  append_sound(bytes, format, 1, {0}, bytes.size() / bytes_a_sample(format), arrival);
  return arrival;
}

/// "0:3+2" for channel 0, frames 3 and 4.
std::vector<std::string> spans(const Arrival& arrival) {
  std::vector<std::string> texts;
  for (const auto& span : arrival.over_range) {
    texts.push_back(std::to_string(span.channel) + ":" + std::to_string(span.first_frame) + "+" +
                    std::to_string(span.frames));
  }
  return texts;
}
using Texts = std::vector<std::string>;
using Values = std::vector<float>;

TEST(SoundSamples, EachFormatIsReadByItsDefinition) {
  // Two's complement, the least significant byte first; full scale is 2^(bits - 1).
  EXPECT_EQ(decoded(SoundFormat::s16, "0000 0100 FFFF 0040 00C0").values,
            Values({0.0F, 0x1p-15F, -0x1p-15F, 0.5F, -0.5F}));
  EXPECT_EQ(decoded(SoundFormat::s24_3, "000000 010000 FFFFFF 000040 0000C0").values,
            Values({0.0F, 0x1p-23F, -0x1p-23F, 0.5F, -0.5F}));
  EXPECT_EQ(decoded(SoundFormat::s32, "00000000 01000000 FFFFFFFF 00000040 000000C0").values,
            Values({0.0F, 0x1p-31F, -0x1p-31F, 0.5F, -0.5F}));
  EXPECT_EQ(decoded(SoundFormat::f32, "00000000 0000003F 000000BF").values, Values({0.0F, 0.5F, -0.5F}));
}

TEST(SoundSamples, TheFourthByteOf24BitsIsNotLookedAt) {
  EXPECT_EQ(decoded(SoundFormat::s24, "00004000 000040FF 0000C000 0000C0FF 010000AA").values,
            Values({0.5F, 0.5F, -0.5F, -0.5F, 0x1p-23F}));
}

TEST(SoundSamples, FullScaleCodesAreOverRangeAndOnesBelowAreNot) {
  // Each: lowest code, one above it, highest code; one below the highest, 0.
  EXPECT_EQ(spans(decoded(SoundFormat::s16, "0080 0180 FF7F FE7F 0000")), Texts({"0:0+3"}));
  EXPECT_EQ(spans(decoded(SoundFormat::s16, "0280 FE7F")), Texts());
  EXPECT_EQ(spans(decoded(SoundFormat::s24_3, "000080 010080 FFFF7F 000000")), Texts({"0:0+3"}));
  EXPECT_EQ(spans(decoded(SoundFormat::s24, "00008000 01008000 FFFF7F00 00000000")), Texts({"0:0+3"}));
  EXPECT_EQ(spans(decoded(SoundFormat::s32, "00000080 01000080 FFFFFF7F 00000000")), Texts({"0:0+3"}));
  EXPECT_EQ(spans(decoded(SoundFormat::f32, "0000803F 000080BF 00000040 0000003F")), Texts({"0:0+3"}));
}

TEST(SoundSamples, TheHighestCodeOfFewerBitsThanTheFormatHasIsOverRangeToo) {
  // 24 and 16 bits at the top of 32, and 16 at the top of 24.
  EXPECT_EQ(spans(decoded(SoundFormat::s32, "00FFFF7F 0000FF7F 00000180 0000FE7F")), Texts({"0:0+3"}));
  EXPECT_EQ(spans(decoded(SoundFormat::s24_3, "00FF7F 000180 00FE7F")), Texts({"0:0+2"}));
}

TEST(SoundSamples, OverRangeIsSaidByChannelAndStretch) {
  // Three channels, five frames; the second channel of the device is not wanted, the third comes first.
  const std::string text = from_hex(
      "0000 FF7F 0100"
      "FF7F FF7F FF7F"
      "FF7F 0000 0300"
      "0000 0000 FF7F"
      "0000 0000 FF7F");
  const std::vector<std::uint8_t> bytes(text.begin(), text.end());
  Arrival arrival;
  append_sound(bytes, SoundFormat::s16, 3, {2, 0}, 5, arrival);
  EXPECT_EQ(arrival.frames, 5U);
  constexpr float kTop = 32'767.0F / 32'768.0F;
  EXPECT_EQ(arrival.values, Values({0x1p-15F, 0, kTop, kTop, 0x3p-15F, kTop, kTop, 0, kTop, 0}));
  EXPECT_EQ(spans(arrival), Texts({"0:1+1", "0:3+2", "1:1+2"}));
  append_sound(bytes, SoundFormat::s16, 3, {2, 0}, 2, arrival);
  EXPECT_EQ(arrival.frames, 7U);
  EXPECT_EQ(spans(arrival), Texts({"0:1+1", "0:3+2", "1:1+2", "0:6+1", "1:6+1"}));
}

TEST(SoundSamples, WhatIsNoNumberStaysNoNumberAndIsNotOverRange) {
  const Arrival arrival = decoded(SoundFormat::f32, "0000C07F");
  ASSERT_EQ(arrival.values.size(), 1U);
  EXPECT_TRUE(std::isnan(arrival.values[0]));
  EXPECT_TRUE(arrival.over_range.empty());
}

// Form of /proc/asound/pcm: the kernel's documentation, sound/designs/procfile, "pcm".
TEST(SoundCards, CaptureDevicesAreListedAsAlsaCallsThem) {
  EXPECT_EQ(capture_devices("00-00: ABC Analog : ABC Analog : playback 1 : capture 1\n"
                            "00-03: HDMI 0 : HDMI 0 : playback 1\n"
                            "01-00: USB Audio : USB Audio : capture 1\n"
                            "12-02: Loopback PCM : Loopback PCM : playback 8 : capture 8\n"),
            Texts({"hw:0,0 (ABC Analog)", "hw:1,0 (USB Audio)", "hw:12,2 (Loopback PCM)"}));
}

TEST(SoundCards, OddLinesAreLeftOut) {
  EXPECT_EQ(capture_devices(""), Texts());
  EXPECT_EQ(capture_devices("\n\n"), Texts());
  EXPECT_EQ(capture_devices("capture 1"), Texts());
  EXPECT_EQ(capture_devices("x-00: A : A : capture 1\n00: A : A : capture 1\n-1-00: A : A : capture 1\n"
                            "01-: A : A : capture 1\n"),
            Texts());
  EXPECT_EQ(capture_devices("03-01:  :  : capture 1"), Texts({"hw:3,1"}));
}

}  // namespace
}  // namespace tramline::acquire
