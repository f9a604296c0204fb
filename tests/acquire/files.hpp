#pragma once

#include <gtest/gtest.h>

#include <filesystem>
#include <fstream>
#include <memory>
#include <string>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/recording.hpp"

namespace tramline::acquire::testing {

namespace fs = std::filesystem;

/// A folder of its own for each test, and recordings in it.
class Recordings : public ::testing::Test {
 protected:
  Recordings() {
    const auto* test = ::testing::UnitTest::GetInstance()->current_test_info();
    folder_ = fs::path(::testing::TempDir()) /
              (std::string("tramline-") + test->test_suite_name() + "-" + test->name());
    fs::remove_all(folder_);
    fs::create_directories(folder_);
  }
  ~Recordings() override { fs::remove_all(folder_); }

  std::string file(const std::string& name, const std::string& content) {
    const fs::path path = folder_ / name;
    std::ofstream(path, std::ios::binary) << content;
    return path.string();
  }
  fs::path folder_;
};

/// Recordings kept beside the project, not in it; empty if they are not there.
inline std::string shared_data(const std::string& name) {
  const fs::path path = fs::path(TRAMLINE_SOURCE_DIR) / ".." / "shared" / "data" / name;
  return fs::exists(path) ? path.string() : std::string();
}

inline std::vector<config::ChannelSettings> wanted(std::vector<std::string> columns, double scale = 1.0) {
  std::vector<config::ChannelSettings> channels;
  for (const std::string& column : columns) {
    config::ChannelSettings channel;
    channel.source_channel = column;
    channel.scale = scale;
    channels.push_back(channel);
  }
  return channels;
}

inline config::RecordingSettings from(const std::string& path) {
  config::RecordingSettings settings;
  settings.path = path;
  return settings;
}

/// Everything a source gives.
struct Heard {
  std::vector<std::vector<float>> volts;  // a channel each
  std::vector<std::int64_t> indices;      // of the samples
  struct Start {
    std::int64_t first;
    measure::GapCause gap;
  };
  std::vector<Start> gaps;  // blocks that do not follow on
  std::vector<measure::ClockAnchor> anchors;
  std::int64_t over_range = 0;  // samples at a limit
  std::string error;
  std::string end;
  StreamInfo info;
};

inline Heard hear(Source& source, std::size_t cut = 1000) {
  Heard heard;
  heard.info = source.info();
  measure::Block block;
  std::int64_t expected = 0;
  for (;;) {
    const auto more = source.next(block, cut);
    if (!more) heard.error = more.error().text();
    if (!more || !more.value()) break;
    EXPECT_GT(block.frames(), 0U);
    EXPECT_LE(block.frames(), cut);
    heard.volts.resize(block.channels());
    if (block.first.value != expected || block.gap != measure::GapCause::none)
      heard.gaps.push_back({block.first.value, block.gap});
    if (block.anchor) heard.anchors.push_back(*block.anchor);
    for (const auto& span : block.over_range)
      heard.over_range += static_cast<std::int64_t>(span.frames);
    for (std::size_t i = 0; i < block.frames(); ++i)
      heard.indices.push_back(block.first.value + static_cast<std::int64_t>(i));
    for (std::size_t c = 0; c < block.channels(); ++c) {
      const auto volts = block.channel(c);
      heard.volts[c].insert(heard.volts[c].end(), volts.begin(), volts.end());
    }
    expected = block.first.value + static_cast<std::int64_t>(block.frames());
  }
  heard.end = source.end_remark();
  return heard;
}

inline Heard hear(const config::RecordingSettings& settings,
                  const std::vector<config::ChannelSettings>& channels, std::size_t cut = 1000) {
  auto source = open_recording(settings, channels);
  if (!source) {
    Heard refused;
    refused.error = source.error().text();
    return refused;
  }
  return hear(*source.value(), cut);
}

}  // namespace tramline::acquire::testing
