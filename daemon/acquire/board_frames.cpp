#include "daemon/acquire/board_frames.hpp"

#include <bit>
#include <boost/crc.hpp>
#include <cmath>
#include <cstring>

namespace tramline::acquire {
namespace {

constexpr std::uint8_t kSync0 = 0xA7;
constexpr std::uint8_t kSync1 = 0x4D;
constexpr std::uint8_t kVersion = 1;
constexpr std::uint8_t kHello = 1;
constexpr std::uint8_t kSamples = 2;
constexpr std::size_t kHead = 8;
constexpr std::size_t kCheck = 4;
constexpr std::size_t kMostPayload = 4096;
constexpr std::size_t kHelloBytes = 64;
constexpr std::size_t kChannelBytes = 24;
constexpr std::size_t kSamplesHead = 8;
constexpr std::size_t kMostChannels = 8;

std::uint32_t whole(const std::uint8_t* at, int bytes) {
  std::uint32_t value = 0;
  for (int i = 0; i < bytes; ++i)
    value |= std::uint32_t{at[i]} << (8 * i);
  return value;
}

/// Text up to the first zero byte; what no terminal should see is shown as '?'.
std::string text(const std::uint8_t* at, std::size_t bytes) {
  std::string found;
  for (std::size_t i = 0; i < bytes && at[i] != 0; ++i)
    found += at[i] < 0x20 || at[i] >= 0x7F ? '?' : static_cast<char>(at[i]);
  return found;
}

std::uint32_t crc_of(std::span<const std::uint8_t> bytes) {
  boost::crc_32_type crc;
  crc.process_bytes(bytes.data(), bytes.size());
  return crc.checksum();
}

}  // namespace

std::int32_t board_count(const std::uint8_t* at, int bytes) {
  const int spare = 8 * (4 - bytes);
  return static_cast<std::int32_t>(whole(at, bytes) << spare) >> spare;
}

void BoardFrameDecoder::feed(std::span<const std::uint8_t> bytes) {
  bytes_.erase(bytes_.begin(), bytes_.begin() + static_cast<std::ptrdiff_t>(begin_));
  begin_ = 0;
  bytes_.insert(bytes_.end(), bytes.begin(), bytes.end());
}

void BoardFrameDecoder::forget_rest() {
  refuse(bytes_.size() - begin_);
}

void BoardFrameDecoder::refuse(std::size_t bytes) {
  refused_bytes_ += static_cast<std::int64_t>(bytes);
  begin_ += bytes;
}

std::optional<std::variant<BoardHello, BoardSamples>> BoardFrameDecoder::next() {
  for (;;) {
    const std::span<const std::uint8_t> rest = std::span(bytes_).subspan(begin_);
    std::size_t skip = 0;
    while (skip < rest.size() &&
           (rest[skip] != kSync0 || (skip + 1 < rest.size() && rest[skip + 1] != kSync1)))
      ++skip;
    if (skip > 0) {
      refuse(skip);
      continue;
    }
    if (rest.size() < kHead) return std::nullopt;
    const std::size_t length = whole(&rest[4], 2);
    if (rest[2] != kVersion || length > kMostPayload) {
      refuse(1);
      continue;
    }
    if (rest.size() < kHead + length + kCheck) return std::nullopt;
    if (crc_of(rest.subspan(2, kHead - 2 + length)) != whole(&rest[kHead + length], 4)) {
      refuse(1);
      continue;
    }
    const std::size_t whole_frame = kHead + length + kCheck;
    const auto payload = rest.subspan(kHead, length);
    if (rest[3] == kHello) {
      if (auto found = hello(payload)) {
        begin_ += whole_frame;
        sample_bytes_ = static_cast<std::size_t>(found->bytes_a_sample) * found->channels.size();
        return *std::move(found);
      }
    } else if (rest[3] == kSamples) {
      if (auto found = samples(payload)) {
        begin_ += whole_frame;
        return *found;
      }
    } else {
      begin_ += whole_frame;  // of a later version of the format: not for us
      continue;
    }
    refuse(whole_frame);
  }
}

std::optional<BoardHello> BoardFrameDecoder::hello(std::span<const std::uint8_t> payload) const {
  if (payload.size() < kHelloBytes) return std::nullopt;
  const std::size_t channels = payload[0];
  const int format = payload[1];
  if (channels < 1 || channels > kMostChannels || format < 1 || format > 3) return std::nullopt;
  if (payload.size() < kHelloBytes + channels * kChannelBytes) return std::nullopt;
  BoardHello hello;
  hello.bytes_a_sample = format + 1;
  hello.rate_hz = whole(&payload[4], 4) / 1000.0;
  hello.begin = whole(&payload[8], 4);
  hello.calibrated_day = whole(&payload[12], 4);
  hello.type = text(&payload[16], 32);
  hello.serial = text(&payload[48], 16);
  for (std::size_t c = 0; c < channels; ++c) {
    const std::uint8_t* at = &payload[kHelloBytes + c * kChannelBytes];
    BoardChannel channel;
    channel.name = text(at, 8);
    channel.volts_per_count = std::bit_cast<float>(whole(at + 8, 4));
    channel.offset_counts = std::bit_cast<float>(whole(at + 12, 4));
    channel.lowest = static_cast<std::int32_t>(whole(at + 16, 4));
    channel.highest = static_cast<std::int32_t>(whole(at + 20, 4));
    if (!std::isfinite(channel.volts_per_count) || channel.volts_per_count == 0.0F ||
        !std::isfinite(channel.offset_counts) || channel.lowest >= channel.highest)
      return std::nullopt;
    hello.channels.push_back(std::move(channel));
  }
  if (!(hello.rate_hz >= 1.0)) return std::nullopt;
  return hello;
}

std::optional<BoardSamples> BoardFrameDecoder::samples(std::span<const std::uint8_t> payload) const {
  if (sample_bytes_ == 0 || payload.size() < kSamplesHead) return std::nullopt;
  BoardSamples samples;
  samples.first = whole(&payload[0], 4);
  samples.frames = whole(&payload[4], 2);
  samples.over_range = payload[6];
  samples.lost_before = (payload[7] & 1U) != 0;
  samples.bytes = payload.subspan(kSamplesHead);
  if (samples.frames == 0 || samples.bytes.size() != samples.frames * sample_bytes_) return std::nullopt;
  return samples;
}

}  // namespace tramline::acquire
