#include <gmock/gmock.h>

#include "tests/acquire/whole_stream.hpp"

// Layout of .cfg, .dat and .cff: IEEE C37.111-1999 and IEC 60255-24:2013, from memory unless a line says
// otherwise.

namespace tramline::acquire {
namespace {

using measure::GapCause;
using ::testing::ElementsAre;
using ::testing::HasSubstr;
using ::testing::IsEmpty;
using ::testing::Not;

/// A .cfg, line by line; what a test does not set is the plain case.
struct Cfg {
  std::string head = "SITE7,LOGGER3,1999";
  std::string counts = "2,2A,0D";
  std::vector<std::string> channels = {"1,Uin_L1,L1,,V,0.5,0,0,-32767,32767,1,1,P",
                                       "2,Uout_L1,L1,,V,0.25,1,0,-32767,32767,1,1,P"};
  std::vector<std::string> rates = {"1", "6400,4"};
  std::string first = "01/12/2026,05:50:26.000000";
  std::string kind = "ASCII";
  std::vector<std::string> rest = {"1"};

  [[nodiscard]] std::string text(const std::string& end = "\r\n") const {
    std::string all = head + end + counts + end;
    for (const auto& line : channels)
      all += line + end;
    all += "50" + end;
    for (const auto& line : rates)
      all += line + end;
    all += first + end + first + end + kind + end;
    for (const auto& line : rest)
      all += line + end;
    return all;
  }
};

constexpr const char* kFourRows = "1,0,10,20\r\n2,156,-10,40\r\n3,313,30,60\r\n4,469,-30,80\r\n";
constexpr std::int64_t kFirstUtc = 1796104226'000'000'000;  // 2026-12-01T05:50:26Z, by date(1)

struct Pair {
  RecordingFolder folder;
  std::string path;
  Pair(const std::string& cfg, const std::string& dat, const std::string& cfg_name = "r.cfg",
       const std::string& dat_name = "r.dat") {
    path = folder.write(cfg_name, cfg);
    folder.write(dat_name, dat);
  }
};

const std::vector<config::ChannelSettings> kBoth = {wanted(""), wanted("")};

TEST(ComtradeEdges, ChannelsAreWantedByNameOrNumberThenScaled) {
  const Pair pair(Cfg{}.text(), kFourRows);
  const Stream stream = read_recording(pair.path, {wanted("Uout_L1", 2.0, 1.0), wanted("1", -1.0)});
  EXPECT_THAT(stream.volts[0], ElementsAre(14.0F, 24.0F, 34.0F, 44.0F));
  EXPECT_THAT(stream.volts[1], ElementsAre(-5.0F, 5.0F, -15.0F, 15.0F));
  const std::string text = refusal(pair.path, {wanted("Uin_L2")});
  EXPECT_THAT(text, HasSubstr("Uin_L2"));
  EXPECT_THAT(text, HasSubstr("Uin_L1"));
  EXPECT_THAT(text, HasSubstr("Uout_L1"));
}

TEST(ComtradeEdges, Binary32RecordsAndTheirStatusWords) {
  Cfg cfg;
  cfg.head = "S,L,2013";
  cfg.counts = "19,2A,17D";
  for (int i = 1; i <= 17; ++i)
    cfg.channels.push_back(std::to_string(i) + ",S" + std::to_string(i) + ",,,0");
  cfg.rates = {"1", "6400,3"};
  cfg.kind = "BINARY32";
  cfg.rest = {"1", "0,0", "0,0"};
  std::string dat;
  const std::int32_t rows[3][2] = {{100000, 4}, {INT32_MIN, 8}, {-100000, -4}};
  for (std::uint32_t n = 1; n <= 3; ++n)
    dat += little(n) + little(0xffffffffU) + little(rows[n - 1][0]) + little(rows[n - 1][1]) +
           std::string("\1\0\2\0", 4);
  const Pair pair(cfg.text(), dat);
  const Stream stream = read_recording(pair.path, kBoth);
  EXPECT_THAT(stream.volts[0], ElementsAre(50000.0F, -50000.0F)) << stream.error;
  EXPECT_THAT(stream.volts[1], ElementsAre(2.0F, 0.0F));
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{1, 2, GapCause::not_a_number}));
}

TEST(ComtradeEdges, UnitsBecomeVoltsAndWhatIsNoVoltageIsSaid) {
  struct Case {
    const char* unit;
    float volts;
    bool remarked;
  };
  for (const Case& one : {Case{"V", 5.0F, false}, Case{"kV", 5000.0F, false}, Case{"KV", 5000.0F, false},
                          Case{"mV", 0.005F, false}, Case{"A", 5.0F, true}, Case{"", 5.0F, true}}) {
    Cfg cfg;
    cfg.channels[0] = std::string("1,Uin_L1,L1,,") + one.unit + ",0.5,0,0,-32767,32767,1,1,P";
    const Pair pair(cfg.text(), kFourRows);
    const Stream stream = read_recording(pair.path, {wanted("1")});
    EXPECT_FLOAT_EQ(stream.volts[0].at(0), one.volts) << one.unit;
    EXPECT_EQ(any_contains(stream.info.remarks, "Uin_L1"), one.remarked) << one.unit;
  }
}

TEST(ComtradeEdges, PrimaryAndSecondaryValues) {
  for (const char* side : {"P", "p", "S", "s"}) {
    Cfg cfg;
    cfg.channels[0] = std::string("1,Uin_L1,L1,,V,0.5,0,0,-32767,32767,11000,110,") + side;
    const Pair pair(cfg.text(), kFourRows);
    config::RecordingSettings settings;
    settings.path = pair.path;
    const bool states_primary = (side[0] | 0x20) == 'p';
    EXPECT_FLOAT_EQ(read_recording(settings, {wanted("1")}).volts[0].at(0), states_primary ? 0.05F : 5.0F)
        << side;
    settings.primary = true;
    EXPECT_FLOAT_EQ(read_recording(settings, {wanted("1")}).volts[0].at(0), states_primary ? 5.0F : 500.0F)
        << side;
  }
}

TEST(ComtradeEdges, TimesOfTheThreeRevisions) {
  struct Case {
    const char* head;
    const char* first;
    std::vector<std::string> rest;
    std::int64_t utc_ns;
    bool zone_assumed;
  };
  const Case cases[] = {
      {"S,L", "12/01/26,05:50:26.250000", {}, kFirstUtc + 250'000'000, true},
      {"S,L,1991", "12/01/2026,05:50:26.5", {}, kFirstUtc + 500'000'000, true},
      {"S,L,1999", "01/12/2026,05:50:26.000001", {"1"}, kFirstUtc + 1000, true},
      {"S,L,2013", "01/12/2026,05:50:26.000000001", {"1", "0,0", "0,0"}, kFirstUtc + 1, false},
      {"S,L,2013",
       "01/12/2026,05:50:26.000000",
       {"1", "+10h30,+10h30", "0,0"},
       kFirstUtc - 37800'000'000'000,
       false},
      {"S,L,2013",
       "01/12/2026,05:50:26.000000",
       {"1", "-7h15,-7h15", "0,0"},
       kFirstUtc + 26100'000'000'000,
       false},
      {"S,L,2013", "01/12/2026,05:50:26.000000", {"1", "0,-4", "0,0"}, kFirstUtc, false},
      {"S,L,2013", "01/12/2026,05:50:26.000000", {"1", "-4,-4", "0,0"}, kFirstUtc + 14400'000'000'000, false},
      {"S,L,2013", "01/12/2026,05:50:26.000000", {"1", "x,x", "0,0"}, kFirstUtc, true},
  };
  for (const Case& one : cases) {
    Cfg cfg;
    cfg.head = one.head;
    cfg.first = one.first;
    cfg.rest = one.rest;
    const Pair pair(cfg.text(), kFourRows);
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_TRUE(stream.info.dated) << one.head << stream.error;
    EXPECT_EQ(stream.info.begin.value, one.utc_ns) << one.head << " " << one.first;
    EXPECT_EQ(any_contains(stream.info.remarks, "UTC"), one.zone_assumed) << one.head << " " << one.first;
  }
}

TEST(ComtradeEdges, ATimeThatCannotBeReadLeavesTheRecordingUndated) {
  for (const char* first : {"00/00/0000,00:00:00.000000", "31/02/2026,00:00:00.0", "1/1/2026,25:00:00",
                            "99999999999/1/2026,00:00:00", ",", "a/b/c,d:e:f"}) {
    Cfg cfg;
    cfg.first = first;
    const Pair pair(cfg.text(), kFourRows);
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_EQ(stream.index.size(), 4U) << first << stream.error;
    EXPECT_FALSE(stream.info.dated) << first;
    EXPECT_EQ(stream.info.begin.value, 0) << first;
  }
}

TEST(ComtradeEdges, EveryLineEndAndBlankLinesAndEndOfFileCharacters) {
  std::string rows(kFourRows);
  const auto with_ends = [](std::string text, const std::string& end) {
    std::string out;
    for (const char c : text) {
      if (c == '\n') out += end;
      if (c != '\n' && c != '\r') out += c;
    }
    return out;
  };
  for (const char* end : {"\n", "\r\n", "\r\r\n", "\r\n\r\n", " \r\n"}) {
    for (const char* tail : {"", "\x1a", "\x1a\x1a\x1a"}) {
      const Pair pair(Cfg{}.text(end) + tail, with_ends(rows, end) + tail);
      const Stream stream = read_recording(pair.path, kBoth);
      EXPECT_EQ(stream.error, "");
      EXPECT_EQ(stream.index.size(), 4U);
      EXPECT_EQ(stream.end_remark, "end of file");
    }
  }
  // Without a line end after the last row, and an end-of-file character right behind it.
  Cfg cfg;
  rows.resize(rows.size() - 2);
  for (const char* tail : {"", "\x1a", "\x1a\x1a"}) {
    const Pair pair(cfg.text(), rows + tail);
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_THAT(stream.volts[1], ElementsAre(6.0F, 11.0F, 16.0F, 21.0F)) << stream.error << stream.end_remark;
  }
}

TEST(ComtradeEdges, TheDataFileIsFoundWhateverTheCaseOfItsLetters) {
  for (const auto& [cfg, dat] :
       {std::pair("r.cfg", "r.DAT"), std::pair("R.CFG", "R.DAT"), std::pair("R.Cfg", "r.dat")}) {
    const Pair pair(Cfg{}.text(), kFourRows, cfg, dat);
    EXPECT_EQ(read_recording(pair.path, kBoth).index.size(), 4U) << cfg << " " << dat;
  }
  const RecordingFolder folder;
  const std::string path = folder.write("alone.cfg", Cfg{}.text());
  EXPECT_THAT(refusal(path, kBoth), HasSubstr(".dat"));
}

TEST(ComtradeEdges, MissingValuesAreGapsAndCounted) {
  struct Case {
    const char* head;
    std::vector<std::string> rest;
    const char* missing;
  };
  for (const Case& one : {Case{"S,L,1999", {"1"}, "99999"}, Case{"S,L,2013", {"1", "0,0", "0,0"}, ""},
                          Case{"S,L,2013", {"1", "0,0", "0,0"}, "99999"}}) {
    Cfg cfg;
    cfg.head = one.head;
    cfg.rest = one.rest;
    const Pair pair(cfg.text(), std::string("1,0,10,20\r\n2,156,") + one.missing +
                                    ",40\r\n3,313,30,60\r\n4,469,-30," + one.missing + "\r\n");
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_THAT(stream.index, ElementsAre(0, 2)) << one.head << stream.error;
    EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{1, 2, GapCause::not_a_number})) << one.head;
    EXPECT_THAT(stream.end_remark, HasSubstr("2 samples"));
    const Stream other = read_recording(pair.path, {wanted("2")});
    EXPECT_THAT(other.index, ElementsAre(0, 1, 2))
        << "a value missing in a channel that is not wanted matters not";
  }
}

TEST(ComtradeEdges, ABinaryValueAtTheRecordersLimitIsOverRange) {
  Cfg cfg;
  cfg.kind = "BINARY";
  std::string dat;
  const int values[] = {32767, 32766, -32767, -32766};
  for (std::uint32_t n = 1; n <= 4; ++n)
    dat +=
        little(n) + little(0U) + little(static_cast<std::int16_t>(values[n - 1])) + little<std::int16_t>(0);
  const Pair pair(cfg.text(), dat);
  EXPECT_THAT(read_recording(pair.path, kBoth).over_range, ElementsAre(std::pair(0U, 0), std::pair(0U, 2)));
}

TEST(ComtradeEdges, SampleNumbersThatJumpAreLostSamples) {
  Cfg cfg;
  cfg.rates = {"1", "6400,10"};
  const Pair pair(cfg.text(), "1,0,10,20\r\n2,156,-10,40\r\n9,1250,30,60\r\n10,1406,-30,80\r\n");
  config::RecordingSettings settings;
  settings.path = pair.path;
  const Stream stream = read_recording(settings, kBoth);
  EXPECT_THAT(stream.index, ElementsAre(0, 1, 8, 9)) << stream.error;
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{2, 8, GapCause::samples_lost}));
  expect_independent_of_the_cut(settings, kBoth);
}

TEST(ComtradeEdges, SampleNumbersThatGoBackAreAnError) {
  const Pair pair(Cfg{}.text(), "1,0,10,20\r\n2,156,-10,40\r\n2,313,30,60\r\n4,469,-30,80\r\n");
  config::RecordingSettings settings;
  settings.path = pair.path;
  const Stream stream = read_recording(settings, kBoth);
  EXPECT_THAT(stream.index, ElementsAre(0, 1));
  EXPECT_THAT(stream.error, HasSubstr("sample 2"));
  expect_independent_of_the_cut(settings, kBoth);
}

TEST(ComtradeEdges, ADataFileShorterThanPromisedEndsEarlyAndSaysSo) {
  {
    const Pair pair(Cfg{}.text(), "1,0,10,20\r\n2,156,-10,40\r\n");
    EXPECT_THAT(read_recording(pair.path, kBoth).end_remark, HasSubstr("2 of 4"));
  }
  {
    const Pair pair(Cfg{}.text(), "1,0,10,20\r\n2,156,-10,40\r\n3,31");
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_EQ(stream.error, "");
    EXPECT_THAT(stream.end_remark, HasSubstr("2 of 4"));
    EXPECT_THAT(stream.end_remark, HasSubstr("cut short"));
  }
  Cfg cfg;
  cfg.kind = "BINARY";
  std::string dat;
  for (std::uint32_t n = 1; n <= 4; ++n)
    dat += little(n) + little(0U) + little<std::int16_t>(7) + little<std::int16_t>(0);
  for (std::size_t size = 1; size < dat.size(); ++size) {
    const Pair pair(cfg.text(), dat.substr(0, size));
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_EQ(stream.error, "") << size;
    EXPECT_EQ(stream.index.size(), size / 12) << size;
    EXPECT_THAT(stream.end_remark, HasSubstr(std::to_string(size / 12) + " of 4")) << size;
    EXPECT_EQ(stream.end_remark.find("cut short") != std::string::npos, size % 12 != 0) << size;
  }
}

TEST(ComtradeEdges, ADataFileLongerThanPromisedIsReadAndSaid) {
  Cfg cfg;
  cfg.rates = {"1", "6400,2"};
  const Pair pair(cfg.text(), kFourRows);
  const Stream stream = read_recording(pair.path, kBoth);
  EXPECT_EQ(stream.index.size(), 4U) << stream.error;
  EXPECT_THAT(stream.end_remark, HasSubstr("2 samples more"));
}

TEST(ComtradeEdges, SampleNumbersFromZeroAreCountedFromOne) {
  const Pair pair(Cfg{}.text(), "0,0,10,20\r\n1,156,-10,40\r\n2,313,30,60\r\n3,469,-30,80\r\n");
  const Stream stream = read_recording(pair.path, kBoth);
  EXPECT_THAT(stream.index, ElementsAre(0, 1, 2, 3)) << stream.error;
  EXPECT_EQ(stream.end_remark, "end of file");
}

TEST(ComtradeEdges, ARowWithOtherFieldsIsAnErrorWithItsLine) {
  for (const char* row : {"2,156,-10\r\n", "2,156,-10,40,1\r\n"}) {
    const Pair pair(Cfg{}.text(), std::string("1,0,10,20\r\n") + row + "3,313,30,60\r\n");
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_EQ(stream.index.size(), 1U);
    EXPECT_THAT(stream.error, HasSubstr("r.dat:2"));
  }
}

/// `rows` ASCII rows with sample numbers from 1; the first channel is the number, the second 0.
std::string numbered_rows(std::int64_t rows) {
  std::string text;
  for (std::int64_t n = 1; n <= rows; ++n)
    text += std::to_string(n) + ",," + std::to_string(n) + ",0\n";
  return text;
}

TEST(ComtradeEdges, ASectionAtAnotherRateIsAGapAndSaid) {
  Cfg cfg;
  cfg.channels[0] = "1,U,,,V,1,0,0,-32767,32767,1,1,P";
  cfg.rates = {"3", "6400,640", "1200,760", "6400,1400"};  // 0.1 s, 0.1 s, 0.1 s
  const Pair pair(cfg.text(), numbered_rows(1400));
  config::RecordingSettings settings;
  settings.path = pair.path;
  const Stream stream = read_recording(settings, {wanted("1")});
  EXPECT_EQ(stream.info.rate_hz, 6400.0);
  EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{640, 1280, GapCause::rate_change})) << "0.1 s at 6400 Hz";
  EXPECT_EQ(stream.index.size(), 1280U);
  EXPECT_EQ(stream.volts[0][640], 761.0F);
  ASSERT_FALSE(stream.anchors.empty());
  EXPECT_EQ(stream.anchors.back().at, 1280);
  EXPECT_EQ(stream.anchors.back().utc_ns, kFirstUtc + 200'000'000);
  EXPECT_TRUE(any_contains(stream.info.remarks, "1 of 3"));
  EXPECT_TRUE(any_contains(stream.info.remarks, "0.1"));
  EXPECT_EQ(stream.end_remark, "end of file") << "samples left out are none that were marked missing";
  expect_independent_of_the_cut(settings, {wanted("1")});
}

TEST(ComtradeEdges, WithoutRatesTheStampsRule) {
  for (const char* head : {"S,L,1999", "S,L,1991"}) {
    Cfg cfg;
    cfg.head = head;
    cfg.rates = {"0", "0,2000"};
    std::string dat;
    std::int64_t n = 0;
    for (int i = 0; i < 2000; ++i) {
      if (i >= 1000 && i < 1064) continue;  // 10 ms are missing
      dat += std::to_string(++n) + "," + std::to_string(std::llround(i * 156.25)) + "," + std::to_string(i) +
             ",0\r\n";
    }
    const Pair pair(cfg.text(), dat);
    config::RecordingSettings settings;
    settings.path = pair.path;
    const Stream stream = read_recording(settings, {wanted("1")});
    EXPECT_NEAR(stream.info.rate_hz, 6400.0, 0.5)
        << "stamps rounded to a microsecond must not shift the rate; " << stream.error;
    EXPECT_THAT(stream.gaps, ElementsAre(Stream::Gap{1000, 1064, GapCause::time_jump})) << head;
    EXPECT_EQ(stream.index.size(), 1936U);
    expect_independent_of_the_cut(settings, {wanted("1")});
  }
}

TEST(ComtradeEdges, WithoutRatesStampsCountInNanosecondsWhereTheDateHasNineDecimalsAndByTheMultiplier) {
  Cfg cfg;
  cfg.head = "S,L,2013";
  cfg.rates = {"0", "0,4"};
  cfg.first = "01/12/2026,05:50:26.000000000";
  cfg.rest = {"1", "0,0", "0,0"};
  const std::string rows = "1,0,1,0\n2,156250,2,0\n3,312500,3,0\n4,468750,4,0\n";
  const Pair nanoseconds(cfg.text(), rows);
  EXPECT_NEAR(read_recording(nanoseconds.path, {wanted("1")}).info.rate_hz, 6400.0, 1e-6);
  cfg.first = "01/12/2026,05:50:26.000000";
  cfg.rest[0] = "0.01";
  const Pair multiplied(cfg.text(), rows);
  EXPECT_NEAR(read_recording(multiplied.path, {wanted("1")}).info.rate_hz, 640.0, 1e-6);
}

TEST(ComtradeEdges, WithoutRatesStampsThatGoBackAreNoPlainSailing) {
  Cfg cfg;
  cfg.rates = {"0", "0,8"};
  const Pair pair(cfg.text(),
                  "1,0,1,0\n2,1000,2,0\n3,2000,3,0\n4,3000,4,0\n5,500,5,0\n6,1500,6,0\n7,2500,7,0\n");
  const Stream stream = read_recording(pair.path, {wanted("1")});
  EXPECT_EQ(stream.index.size(), 4U);
  EXPECT_THAT(stream.error, HasSubstr("sample 5"));
}

TEST(ComtradeEdges, WithoutRatesEverySampleNeedsItsStampAndStampsCannotLeapBeyondAllBounds) {
  Cfg cfg;
  cfg.rates = {"0", "0,9"};
  std::string rows;
  for (int n = 1; n <= 600; ++n)
    rows += std::to_string(n) + "," + std::to_string(n * 1000) + ",1,0\n";
  for (const char* stamp : {"", "x", "-5", "9223372036854775807", "999999999999999999"}) {
    const Pair pair(cfg.text(), rows + "601," + stamp + ",1,0\n602,602000,1,0\n");
    const Stream stream = read_recording(pair.path, {wanted("1")});
    EXPECT_EQ(stream.index.size(), 600U) << stamp;
    EXPECT_THAT(stream.error, HasSubstr("sample 601")) << stamp;
  }
}

TEST(ComtradeEdges, WithoutRatesDataShorterThanPromisedIsSaidToo) {
  Cfg cfg;
  cfg.rates = {"0", "0,9"};
  const Pair pair(cfg.text(), "1,0,1,0\n2,1000,2,0\n3,2000,3,0\n4,3000,4,0\n");
  EXPECT_THAT(read_recording(pair.path, {wanted("1")}).end_remark, HasSubstr("4 of 9"));
}

TEST(ComtradeEdges, SectionsBeyondAllTimeAreRefused) {
  for (const char* slow : {"1e-300,1000000", "0.00001,1000000"}) {
    Cfg cfg;
    cfg.rates = {"3", "6400,640", slow, "6400,2000000"};
    const Pair pair(cfg.text(), kFourRows);
    EXPECT_NE(refusal(pair.path, kBoth), "") << slow;
  }
}

TEST(ComtradeEdges, CombinedFilesHoldTextOrBinaryData) {
  const RecordingFolder folder;
  const std::string text =
      "--- file type: CFG ---\r\n" + Cfg{}.text() +
      "--- file type: INF ---\r\n\r\n--- file type: HDR ---\r\nhello\r\n--- file type: DAT ASCII ---\r\n" +
      kFourRows;
  const Stream ascii = read_recording(folder.write("a.cff", text), kBoth);
  EXPECT_THAT(ascii.volts[0], ElementsAre(5.0F, -5.0F, 15.0F, -15.0F)) << ascii.error;
  Cfg cfg;
  cfg.kind = "BINARY";
  std::string dat;
  for (std::uint32_t n = 1; n <= 4; ++n)
    dat += little(n) + little(0U) + little(static_cast<std::int16_t>(n * 256 + 10)) +
           little<std::int16_t>(0x0a0d);
  const Stream binary = read_recording(folder.write("B.CFF", "--- file type: CFG ---\n" + cfg.text("\n") +
                                                                 "--- file type: DAT BINARY: 48 ---\n" + dat),
                                       kBoth);
  EXPECT_THAT(binary.volts[0], ElementsAre(133.0F, 261.0F, 389.0F, 517.0F)) << binary.error;
}

TEST(ComtradeEdges, MalformedConfigurationsAreRefusedWithFileAndLine) {
  struct Case {
    const char* name;
    Cfg cfg;
    const char* says;
  };
  std::vector<Case> cases;
  const auto add = [&cases](const char* name, const char* says, auto change) {
    Cfg cfg;
    change(cfg);
    cases.push_back({name, cfg, says});
  };
  add("no analog channels", "r.cfg:2", [](Cfg& c) { c.counts = "2,0A,2D"; });
  add("counts do not add up", "r.cfg:2", [](Cfg& c) { c.counts = "5,2A,0D"; });
  add("no counts", "r.cfg:2", [](Cfg& c) { c.counts = "two"; });
  add("negative counts", "r.cfg:2", [](Cfg& c) { c.counts = "1,2A,-1D"; });
  add("a million channels", "r.cfg:2", [](Cfg& c) { c.counts = "1000000,1000000A,0D"; });
  add("counts beyond all integers", "r.cfg:2",
      [](Cfg& c) { c.counts = "99999999999999999999,99999999999999999999A,0D"; });
  add("fewer channels than counted", "r.cfg:5", [](Cfg& c) { c.counts = "3,3A,0D"; });
  add("a is no number", "r.cfg:3",
      [](Cfg& c) { c.channels[0] = "1,Uin_L1,L1,,V,abc,0,0,-32767,32767,1,1,P"; });
  add("a is infinite", "r.cfg:3",
      [](Cfg& c) { c.channels[0] = "1,Uin_L1,L1,,V,inf,0,0,-32767,32767,1,1,P"; });
  add("revision is no year", "r.cfg:1", [](Cfg& c) { c.head = "S,L,next"; });
  add("rate 0", "r.cfg:7", [](Cfg& c) { c.rates = {"1", "0,4"}; });
  add("rate negative", "r.cfg:7", [](Cfg& c) { c.rates = {"1", "-6400,4"}; });
  add("rate nan", "r.cfg:7", [](Cfg& c) { c.rates = {"1", "nan,4"}; });
  add("rate 1e9", "r.cfg:7", [](Cfg& c) { c.rates = {"1", "1e9,4"}; });
  add("rate 50", "360 Hz to 1 MHz", [](Cfg& c) { c.rates = {"1", "50,4"}; });
  add("no samples", "r.cfg:7", [](Cfg& c) { c.rates = {"1", "6400,0"}; });
  add("more samples than can be", "r.cfg:7", [](Cfg& c) { c.rates = {"1", "6400,9223372036854775807"}; });
  add("sections that go back", "r.cfg:8", [](Cfg& c) { c.rates = {"2", "6400,100", "6400,50"}; });
  add("a million rates", "r.cfg:6", [](Cfg& c) { c.rates = {"1000000000", "6400,4"}; });
  add("kind of data", "r.cfg:10", [](Cfg& c) { c.kind = "BINARY64"; });
  for (const Case& one : cases) {
    const Pair pair(one.cfg.text(), kFourRows);
    EXPECT_THAT(refusal(pair.path, kBoth), HasSubstr(one.says)) << one.name;
  }
  {
    const Pair pair("", kFourRows);
    EXPECT_THAT(refusal(pair.path, kBoth), HasSubstr("empty"));
  }
  {
    const Pair pair(Cfg{}.text(), "");
    EXPECT_THAT(refusal(pair.path, kBoth), HasSubstr("empty"));
  }
}

TEST(ComtradeEdges, EveryTruncationOfAConfigurationIsReadOrRefused) {
  const std::string whole = Cfg{}.text();
  for (std::size_t size = 0; size < whole.size(); ++size) {
    const Pair pair(whole.substr(0, size), kFourRows);
    const Stream stream = read_recording(pair.path, kBoth);
    EXPECT_TRUE(!stream.error.empty() || stream.index.size() == 4U) << size;
  }
}

TEST(ComtradeEdges, AnyBytesAreReadOrRefused) {
  std::uint32_t seed = 7;
  const auto random = [&seed] { return (seed = seed * 1664525U + 1013904223U) >> 8U; };
  static constexpr char kLetters[] = "0123456789,,,\n-+eE /:ADP\x1a\xff\r";
  const RecordingFolder folder;
  for (int trial = 0; trial < 500; ++trial) {
    std::string cfg = Cfg{}.text();
    std::string dat = kFourRows;
    for (int i = 0; i < 3; ++i) {
      cfg[random() % cfg.size()] = kLetters[random() % (sizeof kLetters - 1)];
      dat[random() % dat.size()] = kLetters[random() % (sizeof kLetters - 1)];
    }
    const std::string path = folder.write("fuzz.cfg", cfg);
    folder.write("fuzz.dat", dat);
    read_recording(path, kBoth);
  }
}

}  // namespace
}  // namespace tramline::acquire
