#include "daemon/acquire/comtrade.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>

#include "tests/acquire/files.hpp"

namespace tramline::acquire {
namespace {

using namespace testing;
using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::Not;

using Comtrade = Recordings;

std::string bytes(std::initializer_list<int> values) {
  std::string out;
  for (const int v : values)
    out += static_cast<char>(v);
  return out;
}

std::string config_text(const std::string& revision, const std::string& rates, const std::string& kind,
                        const std::string& channel = "1,UA,A,,V,0.5,1,0,-32767,32767,100,1,S") {
  return "Substation X,Recorder 1" + (revision.empty() ? "" : "," + revision) + "\r\n1,1A,0D\r\n" + channel +
         "\r\n50\r\n" + rates + "01/12/2026,05:50:26.500000\r\n01/12/2026,05:50:26.600000\r\n" + kind +
         "\r\n1\r\n";
}

TEST_F(Comtrade, AsciiValuesAreScaledAndDated) {
  file("a.dat", "1,0,10\r\n2,156,-20\r\n3,312,30\r\n");
  const auto heard =
      hear(from(file("a.cfg", config_text("1999", "1\r\n6400,3\r\n", "ASCII"))), wanted({"UA"}));
  ASSERT_EQ(heard.volts.size(), 1U) << heard.error;
  EXPECT_THAT(heard.volts[0], ElementsAre(6.0F, -9.0F, 16.0F));
  EXPECT_EQ(heard.info.rate_hz, 6400.0);
  EXPECT_EQ(heard.info.begin.value, 1796104226LL * kNsPerSecond + 500'000'000);
  EXPECT_THAT(heard.info.remarks, ::testing::Contains(HasSubstr("taken as UTC")));
  EXPECT_EQ(heard.end, "end of file");
}

TEST_F(Comtrade, PrimaryValuesAreSecondaryTimesTheRatio) {
  file("a.dat", "1,0,10\n");
  const auto path = file("a.cfg", config_text("1999", "1\n6400,1\n", "ASCII"));
  auto settings = from(path);
  settings.primary = true;
  EXPECT_THAT(hear(settings, wanted({"1"})).volts[0], ElementsAre(600.0F));
  const auto primary =
      file("b.cfg", config_text("1999", "1\n6400,1\n", "ASCII", "1,UA,A,,kV,0.5,1,0,-32767,32767,100,1,P"));
  file("b.dat", "1,0,10\n");
  EXPECT_THAT(hear(from(primary), wanted({"1"})).volts[0], ElementsAre(60.0F));
}

TEST_F(Comtrade, TheYearComesLastAndInThe1991RevisionTheMonthFirst) {
  const std::string old =
      "Substation X,Recorder "
      "1\n1,1A,0D\n1,UA,A,,V,0.5,1,0,-32767,32767\n50\n1\n6400,1\n02/13/96,05:50:26.5\n02/13/"
      "96,05:50:26.6\nASCII\n";
  file("a.dat", "1,0,10\n");
  const auto heard = hear(from(file("a.cfg", old)), wanted({"1"}));
  ASSERT_EQ(heard.volts.size(), 1U) << heard.error;
  EXPECT_EQ(heard.info.begin.value, 824190626LL * kNsPerSecond + 500'000'000);
}

TEST_F(Comtrade, ThePlaceOfTheRecorderIsTakenOffTheTimeOfA2013File) {
  file("a.dat", "1,0,10\n");
  const auto heard = hear(
      from(file("a.cfg", config_text("2013", "1\n6400,1\n", "ASCII") + "+5h30,+5h30\nB,3\n")), wanted({"1"}));
  EXPECT_EQ(heard.info.begin.value, (1796104226LL - 19800) * kNsPerSecond + 500'000'000);
  EXPECT_THAT(heard.info.remarks, Not(::testing::Contains(HasSubstr("taken as UTC"))));
}

// The record 5,667,-760,1274,72,61,-140,-502 with six status channels 0,0,0,0,1,1: example of the standard,
// from memory.
TEST_F(Comtrade, ABinaryRecordIsReadByteForByte) {
  std::string config = "X,Y,1999\n12,6A,6D\n";
  for (int i = 1; i <= 6; ++i)
    config += std::to_string(i) + ",U" + std::to_string(i) + ",,,V,1,0,0,-32767,32767,1,1,S\n";
  for (int i = 1; i <= 6; ++i)
    config += std::to_string(i) + ",S" + std::to_string(i) + ",,,0\n";
  config += "50\n1\n6400,5\n01/12/2026,05:50:26.0\n01/12/2026,05:50:26.0\nBINARY\n1\n";
  file("a.dat", bytes({0x05, 0,    0, 0,    0x9B, 0x02, 0,    0,    0x08, 0xFD, 0xFA,
                       0x04, 0x48, 0, 0x3D, 0,    0x74, 0xFF, 0x0A, 0xFE, 0x30, 0}));
  const auto heard = hear(from(file("a.cfg", config)), wanted({"1", "2", "3", "4", "5", "6"}));
  ASSERT_EQ(heard.volts.size(), 6U) << heard.error;
  const float expected[] = {-760, 1274, 72, 61, -140, -502};
  for (std::size_t c = 0; c < 6; ++c)
    EXPECT_THAT(heard.volts[c], ElementsAre(expected[c]));
  EXPECT_THAT(heard.indices, ElementsAre(4));
}

TEST_F(Comtrade, FloatsAndLongIntegersOfThe2013RevisionAreRead) {
  const std::string channels = "1,U,,,V,1,0,0,-32767,32767,1,1,S\n2,W,,,V,1,0,0,-32767,32767,1,1,S\n";
  const auto config = [&](const std::string& kind) {
    return "X,Y,2013\n2,2A,0D\n" + channels +
           "50\n1\n6400,1\n01/12/2026,05:50:26.0\n01/12/2026,05:50:26.0\n" + kind + "\n1\n0,0\nB,0\n";
  };
  // 325.25 and -0.5 as IEEE floats; bytes computed.
  file("f.dat", bytes({1, 0, 0, 0, 0, 0, 0, 0, 0x00, 0xA0, 0xA2, 0x43, 0, 0, 0, 0xBF}));
  const auto floats = hear(from(file("f.cfg", config("FLOAT32"))), wanted({"1", "2"}));
  ASSERT_EQ(floats.volts.size(), 2U) << floats.error;
  EXPECT_EQ(floats.volts[0][0], 325.25F);
  EXPECT_EQ(floats.volts[1][0], -0.5F);
  file("i.dat", bytes({1, 0, 0, 0, 0, 0, 0, 0, 0x40, 0x42, 0x0F, 0, 0xFF, 0xFF, 0xFF, 0xFF}));
  const auto integers = hear(from(file("i.cfg", config("BINARY32"))), wanted({"1", "2"}));
  EXPECT_EQ(integers.volts[0][0], 1000000.0F);
  EXPECT_EQ(integers.volts[1][0], -1.0F);
}

TEST_F(Comtrade, MissingValuesBecomeGapsInEveryKindOfFile) {
  file("a.dat", "1,0,1\n2,156,99999\n3,312,3\n");
  EXPECT_THAT(hear(from(file("a.cfg", config_text("1999", "1\n6400,3\n", "ASCII"))), wanted({"1"})).indices,
              ElementsAre(0, 2));
  file("b.dat", bytes({1, 0, 0, 0, 0, 0, 0, 0, 0, 0x80, 2, 0, 0, 0, 0, 0, 0, 0, 5, 0}));
  const auto heard = hear(from(file("b.cfg", config_text("1999", "1\n6400,2\n", "BINARY"))), wanted({"1"}));
  EXPECT_THAT(heard.indices, ElementsAre(1));
  ASSERT_EQ(heard.gaps.size(), 1U);
  EXPECT_EQ(heard.gaps[0].gap, measure::GapCause::not_a_number);
}

TEST_F(Comtrade, SectionsOfNearlyOneRateAreOneStreamWithAnAnchorEach) {
  std::string data;
  for (int i = 1; i <= 20; ++i)
    data += std::to_string(i) + ",0," + std::to_string(i) + "\n";
  file("a.dat", data);
  const auto heard = hear(from(file("a.cfg", config_text("1999", "3\n2400,8\n2410,16\n2390,20\n", "ASCII"))),
                          wanted({"1"}), 5);
  EXPECT_EQ(heard.volts[0].size(), 20U);
  EXPECT_TRUE(heard.gaps.empty());
  ASSERT_EQ(heard.anchors.size(), 2U);
  EXPECT_EQ(heard.anchors[0].at.value, 8);
  EXPECT_EQ(heard.anchors[0].rate_hz, 2410.0);
  EXPECT_NEAR(static_cast<double>(heard.anchors[1].utc - heard.info.begin),
              (8.0 / 2400.0 + 8.0 / 2410.0) * 1e9, 2.0);
}

TEST_F(Comtrade, ASectionOfAnotherRateIsAGapAndARemark) {
  std::string data;
  for (int i = 1; i <= 30; ++i)
    data += std::to_string(i) + ",0,1\n";
  file("a.dat", data);
  const auto heard =
      hear(from(file("a.cfg", config_text("1999", "3\n2400,10\n600,12\n2400,30\n", "ASCII"))), wanted({"1"}));
  EXPECT_EQ(heard.volts[0].size(), 28U);
  ASSERT_EQ(heard.gaps.size(), 1U);
  EXPECT_EQ(heard.gaps[0].first, 10 + 8);  // two samples at 600 Hz last as long as eight at 2400 Hz
  EXPECT_THAT(heard.info.remarks, ::testing::Contains(HasSubstr("1 of 3 sampling sections (0.003 s)")));
}

TEST_F(Comtrade, WithoutASampleRateTheTimeStampsRule) {
  std::string data;
  for (int i = 0; i < 20; ++i)
    data += std::to_string(i + 1) + "," + std::to_string((i < 10 ? i : i + 5) * 500) + ",1\n";
  file("a.dat", data);
  const auto heard = hear(from(file("a.cfg", config_text("1999", "0\n0,20\n", "ASCII"))), wanted({"1"}));
  EXPECT_EQ(heard.info.rate_hz, 2000.0);
  ASSERT_EQ(heard.gaps.size(), 1U);
  EXPECT_EQ(heard.gaps[0].first, 15);
}

TEST_F(Comtrade, DataShorterThanPromisedEndsEarlyAndSaysSo) {
  file("a.dat", "1,0,10\n2,156,-20\n3,31");
  const auto heard = hear(from(file("a.cfg", config_text("1999", "1\n6400,100\n", "ASCII"))), wanted({"1"}));
  EXPECT_EQ(heard.volts[0].size(), 2U);
  EXPECT_EQ(heard.end, "the data ends early: 2 of 100 samples are there, the last one is cut short");
}

TEST_F(Comtrade, DataThatDisagreesWithItsConfigurationIsRefusedWithThePlace) {
  file("a.dat", "1,0,10,7,8\n2,156,-20,7,8\n");
  EXPECT_THAT(hear(from(file("a.cfg", config_text("1999", "1\n6400,2\n", "ASCII"))), wanted({"1"})).error,
              HasSubstr("a.dat:1: 5 fields, where the configuration promises 3"));
  file("b.dat", "5,0,10\n2,156,-20\n");
  EXPECT_THAT(hear(from(file("b.cfg", config_text("1999", "1\n6400,2\n", "ASCII"))), wanted({"1"})).error,
              HasSubstr("do not rise"));
}

TEST_F(Comtrade, ConfigurationsThatCannotBeAreRefusedWithTheirLine) {
  const std::string tail = "50\n1\n6400,1\n01/12/2026,05:50:26.0\n01/12/2026,05:50:26.0\nASCII\n1\n";
  const std::string channel = "1,UA,A,,V,0.5,1,0,-32767,32767,100,1,S\n";
  struct Bad {
    std::string content;
    const char* says;
  };
  const Bad cases[] = {
      {"", "the file is empty"},
      {"garbage", "a.cfg:1"},
      {"X,Y,1999\n", "the configuration ends where the numbers of channels should stand"},
      {"X,Y,last year\n1,1A,0D\n" + channel + tail, "no revision year"},
      {"X,Y,1999\n2,1A,0D\n" + channel + tail, "do not add up"},
      {"X,Y,1999\n1,0A,1D\n" + tail, "no analog channels"},
      {"X,Y,1999\n999999,999999A,0D\n" + channel + tail, "10000 at most"},
      {"X,Y,1999\n1,1A,0D\n1,UA,A,,V\n" + tail, "a.cfg:3: too few fields for an analog channel"},
      {"X,Y,1999\n1,1A,0D\n1,UA,A,,V,x,1,0,-32767,32767,100,1,S\n" + tail,
       "multiplier of channel UA is no number"},
      {"X,Y,1999\n1,1A,0D\n" + channel + "50\n1\n-6400,1\n", "a sample rate of -6400 Hz"},
      {"X,Y,1999\n1,1A,0D\n" + channel + "50\n1\n9e9,1\n", "a sample rate of 9e9 Hz"},
      {"X,Y,1999\n1,1A,0D\n" + channel + "50\n2\n6400,5\n6400,5\n", "a section ends before it begins"},
      {"X,Y,1999\n1,1A,0D\n" + channel +
           "50\n1\n6400,1\n01/12/2026,05:50:26.0\n01/12/2026,05:50:26.0\nMORSE\n1\n",
       "no kind of data file"},
  };
  file("a.dat", "1,0,1\n");
  for (const Bad& bad : cases)
    EXPECT_THAT(hear(from(file("a.cfg", bad.content)), wanted({"1"})).error, HasSubstr(bad.says))
        << bad.content;
  EXPECT_THAT(hear(from(file("alone.cfg", config_text("1999", "1\n6400,2\n", "ASCII"))), wanted({"1"})).error,
              HasSubstr("no data file (.dat)"));
  EXPECT_THAT(hear(from(file("a.cfg", config_text("1999", "1\n6400,2\n", "ASCII"))), wanted({"UB"})).error,
              HasSubstr("it has 1 (UA)"));
}

// Values, rows and peaks read independently by NumPy from the text of the data file.
TEST_F(Comtrade, ADisturbanceOfAMediumVoltageBusReadsAsAnIndependentReaderReadsIt) {
  const std::string path = shared_data("recorded-sag/sag.cfg");
  if (path.empty()) GTEST_SKIP() << "the recordings beside the project are not here";
  const auto heard = hear(from(path), wanted({"UA", "UB", "UC"}));
  ASSERT_EQ(heard.volts.size(), 3U) << heard.error;
  ASSERT_EQ(heard.volts[0].size(), 5316U);
  EXPECT_TRUE(heard.gaps.empty());
  EXPECT_EQ(heard.anchors.size(), 82U);
  EXPECT_NEAR(heard.volts[0].front(), -52.767776, 1e-4);
  EXPECT_NEAR(heard.volts[1].back(), -42.654504, 1e-4);
  const double rms[] = {60.20250701, 57.47077023, 61.22500438};
  for (std::size_t c = 0; c < 3; ++c) {
    double energy = 0.0;
    for (const float v : heard.volts[c])
      energy += static_cast<double>(v) * static_cast<double>(v);
    EXPECT_NEAR(std::sqrt(energy / 5316.0), rms[c], 1e-5);
  }
  EXPECT_THAT(heard.info.remarks, ::testing::Contains(HasSubstr("revision 2000")));
}

TEST_F(Comtrade, SmallFilesOfOtherProgramsReadToTheirOwnValues) {
  const std::string ascii = shared_data("comtrade-formats/sample_ascii.cfg");
  if (ascii.empty()) GTEST_SKIP() << "the recordings beside the project are not here";
  const double a = 0.1138916015625;
  const double b = 0.05694580078125;
  for (const char* name : {"comtrade-formats/sample_ascii.cfg", "comtrade-formats/sample_ascii.cff"}) {
    const auto heard = hear(from(shared_data(name)), wanted({"IA", "2", "3", "3I0"}));
    ASSERT_EQ(heard.volts.size(), 4U) << heard.error;
    ASSERT_EQ(heard.volts[0].size(), 40U) << name;
    EXPECT_NEAR(heard.volts[0][0], a * -83 + b, 1e-4);
    EXPECT_NEAR(heard.volts[3][1], a * -6 + b, 1e-4);
    EXPECT_EQ(heard.info.rate_hz, 1200.0);
  }
  const auto missing = [&] {
    fs::copy_file(ascii, folder_ / "m.cfg");
    fs::copy_file(shared_data("comtrade-formats/sample_ascii_missing.dat"), folder_ / "m.dat");
    return hear(from((folder_ / "m.cfg").string()), wanted({"1", "2"}));
  }();
  EXPECT_THAT(missing.end, HasSubstr("marked missing"));

  const auto binary = hear(from(shared_data("comtrade-formats/sample_bin.cfg")), wanted({"VA", "VN"}));
  ASSERT_EQ(binary.volts.size(), 2U) << binary.error;
  EXPECT_EQ(binary.volts[0].size(), 5U);
  EXPECT_THAT(hear(from(shared_data("comtrade-formats/sample_float32.cff")), wanted({"1"})).error,
              HasSubstr("360 Hz to 1 MHz"));
}

}  // namespace
}  // namespace tramline::acquire
