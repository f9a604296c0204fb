#include <gmock/gmock.h>

#include "tests/acquire/whole_stream.hpp"

namespace tramline::acquire {
namespace {

using ::testing::HasSubstr;

TEST(Recording, ItsKindIsSeenFromItsNameOrSaid) {
  const RecordingFolder folder;
  config::RecordingSettings settings;
  settings.path = folder.write("table.data", "u\n1\n2\n");
  settings.rate_hz = 1000.0;
  EXPECT_THAT(refusal(settings, {wanted("")}), HasSubstr(".csv")) << "what could be read is said";
  settings.format = config::RecordingFormat::csv;
  EXPECT_EQ(read_recording(settings, {wanted("")}).index.size(), 2U);
  settings.path = folder.write("TABLE.CSV", "u\n1\n2\n");
  settings.format = config::RecordingFormat::by_name;
  EXPECT_EQ(read_recording(settings, {wanted("")}).index.size(), 2U);
}

TEST(Recording, WhatIsNoFileIsRefused) {
  const RecordingFolder folder;
  for (const char* name : {"none.wav", "none.csv", "none.cfg", "none.cff"}) {
    const std::string path = folder.write("x", "") + "/../" + name;
    EXPECT_THAT(refusal(path, {wanted("")}), HasSubstr(name));
  }
  for (const char* name : {"folder.wav", "folder.csv", "folder.cfg", "folder.cff"}) {
    const std::string path = folder.write("y", "") + "." + name;
    std::filesystem::create_directory(path);
    EXPECT_THAT(refusal(path, {wanted("")}), HasSubstr("folder")) << name;
  }
}

TEST(Recording, RatesFrom360HzTo1MHzCanBeMeasured) {
  for (const double rate_hz : {360.0, 400.0, 6400.0, 1e6})
    EXPECT_TRUE(check_rate(rate_hz, "a").ok()) << rate_hz;
  for (const double rate_hz : {0.0, -400.0, 359.9, 1.1e6, double{INFINITY}, std::nan("")})
    EXPECT_FALSE(check_rate(rate_hz, "a").ok()) << rate_hz;
}

}  // namespace
}  // namespace tramline::acquire
