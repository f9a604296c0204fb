#pragma once

#include <gtest/gtest.h>

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstdint>
#include <filesystem>
#include <fstream>
#include <string>
#include <string_view>
#include <type_traits>
#include <utility>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/recording.hpp"

/// Recordings made byte by byte, and a whole stream read back, for the tests of this folder.
namespace tramline::acquire {

/// A file in a folder of its own for each test; gone with it.
class RecordingFolder {
 public:
  RecordingFolder() {
    const auto* test = ::testing::UnitTest::GetInstance()->current_test_info();
    folder_ = std::filesystem::path(::testing::TempDir()) /
              (std::string("tramline_") + test->test_suite_name() + "_" + test->name());
    std::filesystem::remove_all(folder_);
    std::filesystem::create_directories(folder_);
  }
  RecordingFolder(const RecordingFolder&) = delete;
  RecordingFolder& operator=(const RecordingFolder&) = delete;
  ~RecordingFolder() { std::filesystem::remove_all(folder_); }

  std::string write(const std::string& name, std::string_view bytes) const {
    const std::string path = folder_ / name;
    std::ofstream file(path, std::ios::binary);
    file.write(bytes.data(), static_cast<std::streamsize>(bytes.size()));
    return path;
  }

 private:
  std::filesystem::path folder_;
};

/// `value` as little-endian bytes.
template <class T>
std::string little(T value) {
  using Bits = std::make_unsigned_t<T>;
  std::string bytes;
  for (std::size_t i = 0; i < sizeof(T); ++i) {
    bytes += static_cast<char>((static_cast<std::uint64_t>(static_cast<Bits>(value)) >> (8 * i)) & 0xffU);
  }
  return bytes;
}
inline std::string little_float(float value) {
  return little(std::bit_cast<std::uint32_t>(value));
}

/// "56 34 12" as bytes.
inline std::string from_hex(std::string_view hex) {
  std::string bytes;
  unsigned digits = 0;
  unsigned byte = 0;
  for (const char c : hex) {
    if (c == ' ') continue;
    byte = byte * 16 + static_cast<unsigned>(c <= '9' ? c - '0' : (c | 0x20) - 'a' + 10);
    if (++digits % 2 == 0) bytes += static_cast<char>(std::exchange(byte, 0U));
  }
  return bytes;
}

inline config::ChannelSettings wanted(std::string source_channel, double scale = 1.0, double offset = 0.0) {
  config::ChannelSettings channel;
  channel.source_channel = std::move(source_channel);
  channel.scale = scale;
  channel.offset = offset;
  return channel;
}

/// All that a source gave, laid end to end.
struct Stream {
  struct Gap {
    std::int64_t first;  ///< sample missing
    std::int64_t next;   ///< sample that is there again
    measure::GapCause cause;
    bool operator==(const Gap&) const = default;
  };
  struct Anchor {
    std::int64_t at;
    std::int64_t utc_ns;
    double rate_hz;
    bool operator==(const Anchor&) const = default;
  };
  StreamInfo info;
  std::vector<std::int64_t> index;        ///< of each frame
  std::vector<std::vector<float>> volts;  ///< a channel each
  std::vector<Gap> gaps;
  std::vector<Anchor> anchors;
  std::vector<std::pair<std::size_t, std::int64_t>> over_range;  ///< channel and sample, sorted
  std::string end_remark;
  std::string error;  ///< text of the error that ended it, if one did
};

/// Reads `source` to its end, checking what every block must keep.
inline Stream read_all(Source& source, std::size_t most_frames = 4096) {
  Stream stream;
  stream.info = source.info();
  measure::Block block;
  std::int64_t expected = 0;
  double progress = 0.0;
  for (;;) {
    const auto more = source.next(block, most_frames);
    if (!more) {
      stream.error = more.error().text();
      break;
    }
    if (!more.value()) break;
    EXPECT_GE(block.frames(), 1U);
    EXPECT_LE(block.frames(), most_frames);
    EXPECT_GE(block.first.value, expected) << "blocks must not go back";
    EXPECT_EQ(block.gap != measure::GapCause::none, block.first.value != expected)
        << "a gap shows in the index and has a cause, at " << block.first.value;
    if (block.first.value != expected) stream.gaps.push_back({expected, block.first.value, block.gap});
    if (block.anchor) {
      EXPECT_EQ(block.anchor->at, block.first);
      stream.anchors.push_back({block.anchor->at.value, block.anchor->utc.value, block.anchor->rate_hz});
    }
    stream.volts.resize(block.channels());
    for (std::size_t c = 0; c < block.channels(); ++c) {
      for (const float v : block.channel(c)) {
        EXPECT_TRUE(std::isfinite(v));
        stream.volts[c].push_back(v);
      }
    }
    for (std::size_t i = 0; i < block.frames(); ++i) {
      stream.index.push_back(block.first.value + static_cast<std::int64_t>(i));
    }
    for (const auto& span : block.over_range) {
      EXPECT_LT(span.channel, block.channels());
      EXPECT_LE(span.first_frame + span.frames, block.frames());
      for (std::size_t i = 0; i < span.frames; ++i) {
        stream.over_range.emplace_back(span.channel,
                                       block.first.value + static_cast<std::int64_t>(span.first_frame + i));
      }
    }
    expected = block.first.value + static_cast<std::int64_t>(block.frames());
    EXPECT_GE(source.progress(), progress);
    progress = source.progress();
    EXPECT_LE(progress, 1.0);
  }
  std::sort(stream.over_range.begin(), stream.over_range.end());
  stream.end_remark = source.end_remark();
  return stream;
}

/// Opens and reads all; a file that cannot be opened gives an empty stream with `error`.
inline Stream read_recording(const config::RecordingSettings& settings,
                             const std::vector<config::ChannelSettings>& channels,
                             std::size_t most_frames = 4096) {
  auto source = open_recording(settings, channels);
  if (!source) {
    Stream none;
    none.error = "not opened: " + source.error().text();
    none.volts.resize(channels.size());
    return none;
  }
  return read_all(*source.value(), most_frames);
}
inline Stream read_recording(const std::string& path, const std::vector<config::ChannelSettings>& channels,
                             std::size_t most_frames = 4096) {
  config::RecordingSettings settings;
  settings.path = path;
  return read_recording(settings, channels, most_frames);
}

/// Why it cannot be opened; empty if it can.
inline std::string refusal(const config::RecordingSettings& settings,
                           const std::vector<config::ChannelSettings>& channels) {
  const auto source = open_recording(settings, channels);
  return source ? "" : source.error().text();
}
inline std::string refusal(const std::string& path, const std::vector<config::ChannelSettings>& channels) {
  config::RecordingSettings settings;
  settings.path = path;
  return refusal(settings, channels);
}

/// The same samples, gaps, anchors and limits, however the stream is cut.
inline void expect_independent_of_the_cut(const config::RecordingSettings& settings,
                                          const std::vector<config::ChannelSettings>& channels) {
  const Stream whole = read_recording(settings, channels, 1U << 20U);
  ASSERT_FALSE(whole.index.empty()) << whole.error;
  for (const std::size_t most : {std::size_t{1}, std::size_t{7}, std::size_t{1000}}) {
    SCOPED_TRACE(most);
    const Stream cut = read_recording(settings, channels, most);
    EXPECT_EQ(cut.index, whole.index);
    EXPECT_EQ(cut.volts, whole.volts);
    EXPECT_EQ(cut.gaps, whole.gaps);
    EXPECT_EQ(cut.anchors, whole.anchors);
    EXPECT_EQ(cut.over_range, whole.over_range);
    EXPECT_EQ(cut.end_remark, whole.end_remark);
    EXPECT_EQ(cut.error, whole.error);
  }
}

inline bool any_contains(const std::vector<std::string>& texts, std::string_view word) {
  for (const auto& text : texts) {
    if (text.find(word) != std::string::npos) return true;
  }
  return false;
}

}  // namespace tramline::acquire
