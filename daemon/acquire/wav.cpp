#include "daemon/acquire/wav.hpp"

#include <algorithm>
#include <array>
#include <bit>
#include <cmath>
#include <cstring>
#include <limits>
#include <optional>
#include <utility>

#include "daemon/acquire/recording.hpp"

namespace tramline::acquire {
namespace {

using Encoding = WavFormat::Encoding;

template <class T>
T little_endian(const std::uint8_t* bytes) {
  T value = 0;
  for (std::size_t i = 0; i < sizeof(T); ++i)
    value = static_cast<T>(value | static_cast<T>(static_cast<T>(bytes[i]) << (8 * i)));
  return value;
}

Error bad_header(const ByteReader& file, std::string what, std::string remedy) {
  return {file.path() + ", byte " + std::to_string(file.position()), std::move(what), std::move(remedy)};
}

Result<WavFormat> parse_format(const ByteReader& file, std::span<const std::uint8_t> chunk) {
  if (chunk.size() < 16) return bad_header(file, "the format chunk is cut short", "the file is damaged");
  auto tag = little_endian<std::uint16_t>(chunk.data());
  const auto bits = little_endian<std::uint16_t>(chunk.data() + 14);
  constexpr std::uint16_t kExtensible = 0xfffe;
  if (tag == kExtensible) {
    if (chunk.size() < 26)
      return bad_header(file, "the extensible format chunk is cut short", "the file is damaged");
    tag = little_endian<std::uint16_t>(chunk.data() + 24);
  }
  WavFormat format;
  format.channels = little_endian<std::uint16_t>(chunk.data() + 2);
  format.rate_hz = little_endian<std::uint32_t>(chunk.data() + 4);
  format.frame_bytes = little_endian<std::uint16_t>(chunk.data() + 12);
  if (tag == 1 && bits == 16) {
    format.encoding = Encoding::pcm16;
  } else if (tag == 1 && bits == 24) {
    format.encoding = Encoding::pcm24;
  } else if (tag == 1 && bits == 32) {
    format.encoding = Encoding::pcm32;
  } else if (tag == 3 && bits == 32) {
    format.encoding = Encoding::float32;
  } else {
    return bad_header(file,
                      "samples of format " + std::to_string(tag) + " with " + std::to_string(bits) + " bits",
                      "PCM of 16, 24 or 32 bits and 32-bit float can be read");
  }
  if (format.channels == 0) return bad_header(file, "the file has no channels", "it needs at least one");
  if (format.frame_bytes != format.channels * bits / 8U) {
    return bad_header(file, "the size of a frame does not fit the channels and bits", "the file is damaged");
  }
  if (auto sound = check_rate(format.rate_hz, file.path()); !sound) return sound.error();
  return format;
}

/// One channel of `frames` interleaved frames to volts.
using Decode = void (*)(const std::uint8_t* frames, std::size_t count, std::size_t frame_bytes, float scale,
                        float add, float* out);

void decode_pcm16(const std::uint8_t* frames, std::size_t count, std::size_t frame_bytes, float scale,
                  float add, float* out) {
  for (std::size_t i = 0; i < count; ++i) {
    std::int16_t sample = 0;
    std::memcpy(&sample, frames + i * frame_bytes, 2);
    out[i] = static_cast<float>(sample) * scale + add;
  }
}

/// Of two channels side by side a frame is one 32-bit word, and either half of it comes out by shifting: no
/// gathering, so it vectorises.
template <bool kSecond>
void decode_pcm16_of_two(const std::uint8_t* sample, std::size_t count, std::size_t, float scale, float add,
                         float* out) {
  const std::uint8_t* frames = sample - (kSecond ? 2 : 0);
  for (std::size_t i = 0; i < count; ++i) {
    std::uint32_t frame = 0;
    std::memcpy(&frame, frames + 4 * i, 4);
    // Little-endian: the first channel is the lower half.
    const auto high = static_cast<std::int32_t>(kSecond ? frame : frame << 16U);
    out[i] = static_cast<float>(high >> 16) * scale + add;
  }
}

void decode_pcm24(const std::uint8_t* frames, std::size_t count, std::size_t frame_bytes, float scale,
                  float add, float* out) {
  for (std::size_t i = 0; i < count; ++i) {
    const std::uint8_t* b = frames + i * frame_bytes;
    const std::uint32_t high = static_cast<std::uint32_t>(b[0]) << 8U |
                               static_cast<std::uint32_t>(b[1]) << 16U |
                               static_cast<std::uint32_t>(b[2]) << 24U;
    out[i] = static_cast<float>(std::bit_cast<std::int32_t>(high) / 256) * scale + add;
  }
}

void decode_pcm32(const std::uint8_t* frames, std::size_t count, std::size_t frame_bytes, float scale,
                  float add, float* out) {
  for (std::size_t i = 0; i < count; ++i) {
    out[i] = static_cast<float>(
                 std::bit_cast<std::int32_t>(little_endian<std::uint32_t>(frames + i * frame_bytes))) *
                 scale +
             add;
  }
}

void decode_float32(const std::uint8_t* frames, std::size_t count, std::size_t frame_bytes, float scale,
                    float add, float* out) {
  for (std::size_t i = 0; i < count; ++i) {
    out[i] = std::bit_cast<float>(little_endian<std::uint32_t>(frames + i * frame_bytes)) * scale + add;
  }
}

Decode decoder_for(const WavFormat& format, std::size_t column) {
  switch (format.encoding) {
    case Encoding::pcm16:
      if (format.channels != 2 || std::endian::native != std::endian::little) return decode_pcm16;
      return column == 0 ? decode_pcm16_of_two<false> : decode_pcm16_of_two<true>;
    case Encoding::pcm24:
      return decode_pcm24;
    case Encoding::pcm32:
      return decode_pcm32;
    case Encoding::float32:
      break;
  }
  return decode_float32;
}

double full_scale(Encoding encoding) {
  switch (encoding) {
    case Encoding::pcm16:
      return 32768.0;
    case Encoding::pcm24:
      return 8388608.0;
    case Encoding::pcm32:
      return 2147483648.0;
    case Encoding::float32:
      break;
  }
  return 1.0;
}

class WavSource : public Source {
 public:
  WavSource(ByteReader file, const WavFormat& format, const config::RecordingSettings& settings,
            const std::vector<config::ChannelSettings>& channels, const std::vector<std::size_t>& columns)
      : file_(std::move(file)), format_(format), left_(format.data_bytes) {
    const std::size_t sample_bytes = format.frame_bytes / format.channels;
    const double scale = full_scale(format.encoding);
    for (std::size_t c = 0; c < channels.size(); ++c) {
      const double volts = std::abs(channels[c].scale);
      const double top = format.encoding == Encoding::float32 ? std::numeric_limits<double>::infinity()
                                                              : (scale - 1.0) / scale;
      Wanted wanted;
      wanted.byte = columns[c] * sample_bytes;
      wanted.decode = decoder_for(format, columns[c]);
      wanted.scale = static_cast<float>(channels[c].scale / scale);
      wanted.add = static_cast<float>(channels[c].offset * channels[c].scale);
      // Half a step inside full scale, or what float rounds if that is more, so that rounding cannot hide it.
      const double inside = std::max(
          0.4 / scale, 4.0 * std::numeric_limits<float>::epsilon() * (1.0 + std::abs(channels[c].offset)));
      const double middle = channels[c].offset * channels[c].scale;
      wanted.low_v = static_cast<float>(middle - (top - inside) * volts);
      wanted.high_v = static_cast<float>(middle + (top - inside) * volts);
      if (channels[c].range_v > 0.0) {
        wanted.low_v = std::max(wanted.low_v, static_cast<float>(-channels[c].range_v));
        wanted.high_v = std::min(wanted.high_v, static_cast<float>(channels[c].range_v));
      }
      wanted_.push_back(wanted);
      if (channels[c].range_v > 0.0) {
        // A sensor's own limit may lie anywhere: look at every sample.
        lowest_safe_ = 0;
        highest_safe_ = 0;
      }
    }
    info_.rate_hz = format.rate_hz;
    info_.dated = settings.begin.has_value();
    info_.begin = settings.begin.value_or(UtcNs{});
    static constexpr const char* kNames[] = {"16 bit", "24 bit", "32 bit", "32-bit float"};
    info_.what = "WAV file " + file_.path() + ", " + std::to_string(format.channels) +
                 (format.channels == 1 ? " channel, " : " channels, ") +
                 kNames[static_cast<std::size_t>(format.encoding)] + ", " +
                 std::to_string(std::lround(format.rate_hz)) + " samples a second";
    if (left_) info_.frames = *left_ / static_cast<std::int64_t>(format.frame_bytes);
  }

  [[nodiscard]] const StreamInfo& info() const override { return info_; }

  Result<bool> next(measure::Block& block, std::size_t most_frames) override {
    for (;;) {
      if (held_ == 0) {
        auto got = fetch(most_frames);
        if (!got) return got.error();
        if (!got.value()) return false;
      }
      const std::size_t frames = std::min(held_, most_frames);
      const std::uint8_t* from = bytes_.data() + used_ * format_.frame_bytes;
      const std::size_t sound = format_.encoding == Encoding::float32 ? leading(from, frames, true) : frames;
      if (sound > 0) {
        decode(block, from, sound);
        block.gap = missing_before_ ? measure::GapCause::not_a_number : measure::GapCause::none;
        missing_before_ = false;
        advance(sound);
        return true;
      }
      const std::size_t unsound = leading(from, frames, false);
      missing_before_ = true;
      missing_ += static_cast<std::int64_t>(unsound);
      advance(unsound);
    }
  }

  [[nodiscard]] std::string end_remark() const override {
    std::string remark = "end of file";
    if (truncated_)
      remark = "the file ends early: " + std::to_string(position_) + " of " +
               std::to_string(info_.frames.value_or(0)) + " frames are there";
    if (torn_ > 0) remark += ", the last frame is cut short";
    if (missing_ > 0) remark += "; " + std::to_string(missing_) + " frames held no number and were left out";
    return remark;
  }

  [[nodiscard]] double progress() const override { return file_.progress(); }

 private:
  struct Wanted {
    std::size_t byte = 0;  // within a frame
    Decode decode = nullptr;
    float scale = 1.0F;
    float add = 0.0F;
    float low_v = 0.0F;  // at or beyond these: over-range
    float high_v = 0.0F;
  };

  /// Reads the next frames as bytes; false at the end.
  Result<bool> fetch(std::size_t most_frames) {
    std::size_t bytes = most_frames * format_.frame_bytes;
    if (left_)
      bytes = static_cast<std::size_t>(std::min<std::int64_t>(*left_, static_cast<std::int64_t>(bytes)));
    if (bytes_.size() < bytes) bytes_.resize(bytes);
    const auto got = file_.read(std::span(bytes_).first(bytes));
    if (!got) return got.error();
    truncated_ = left_ && got.value() < bytes;
    if (left_) *left_ -= static_cast<std::int64_t>(got.value());
    held_ = got.value() / format_.frame_bytes;
    if (got.value() > 0) torn_ = got.value() % format_.frame_bytes;
    used_ = 0;
    return held_ > 0;
  }

  void advance(std::size_t frames) {
    held_ -= frames;
    used_ += frames;
    position_ += static_cast<std::int64_t>(frames);
  }

  void decode(measure::Block& block, const std::uint8_t* from, std::size_t frames) const {
    block.resize(wanted_.size(), frames);
    block.begin({position_});
    const bool look = may_touch_limit(from, frames);
    for (std::size_t c = 0; c < wanted_.size(); ++c) {
      wanted_[c].decode(from + wanted_[c].byte, frames, format_.frame_bytes, wanted_[c].scale, wanted_[c].add,
                        block.channel(c).data());
      if (look) note_over_range(block, c);
    }
  }

  /// How many of the float frames are numbers in every wanted channel (or, if not `sound`, are not), up to
  /// the first that differs. Goes frame by frame, so that a file of nothing but such changes is still passed
  /// over in one go.
  [[nodiscard]] std::size_t leading(const std::uint8_t* from, std::size_t frames, bool sound) const {
    const auto is_sound = [this](const std::uint8_t* frame) {
      return std::all_of(wanted_.begin(), wanted_.end(), [frame](const Wanted& wanted) {
        float volts = 0.0F;
        decode_float32(frame + wanted.byte, 1, 0, wanted.scale, wanted.add, &volts);
        return std::isfinite(volts);
      });
    };
    std::size_t count = 0;
    while (count < frames && is_sound(from + count * format_.frame_bytes) == sound)
      ++count;
    return count;
  }

  /// false: surely no sample of these frames stands at a limit. Of 16-bit samples the extremes tell, and they
  /// vectorise.
  [[nodiscard]] bool may_touch_limit(const std::uint8_t* from, std::size_t frames) const {
    if (format_.encoding != Encoding::pcm16) return true;
    std::int16_t low = 0;
    std::int16_t high = 0;
    for (std::size_t i = 0; i < frames * format_.channels; ++i) {
      std::int16_t sample = 0;
      std::memcpy(&sample, from + 2 * i, 2);
      low = std::min(low, sample);
      high = std::max(high, sample);
    }
    return low <= lowest_safe_ || high >= highest_safe_;
  }

  void note_over_range(measure::Block& block, std::size_t channel) const {
    const auto volts = block.channel(channel);
    const Wanted& wanted = wanted_[channel];
    // This loop vectorises; only a block that touches a limit is looked at sample by sample.
    int touches = 0;
    for (const float v : volts)
      touches |= static_cast<int>(v <= wanted.low_v) | static_cast<int>(v >= wanted.high_v);
    if (touches == 0) return;
    for (std::size_t i = 0; i < volts.size(); ++i) {
      if (volts[i] > wanted.low_v && volts[i] < wanted.high_v) continue;
      auto& spans = block.over_range;
      if (!spans.empty() && spans.back().channel == channel &&
          spans.back().first_frame + spans.back().frames == i) {
        ++spans.back().frames;
      } else {
        spans.push_back({channel, i, 1});
      }
    }
  }

  ByteReader file_;
  WavFormat format_;
  StreamInfo info_;
  std::vector<Wanted> wanted_;
  std::optional<std::int64_t> left_;  // bytes of samples still in the file
  std::vector<std::uint8_t> bytes_;
  std::size_t held_ = 0;  // frames in `bytes_` not yet given
  std::size_t used_ = 0;
  std::int64_t position_ = 0;
  std::int64_t missing_ = 0;
  bool missing_before_ = false;
  bool truncated_ = false;
  std::size_t torn_ = 0;
  std::int16_t lowest_safe_ = -32767;  // raw values at or beyond these have to be looked at
  std::int16_t highest_safe_ = 32767;
};

}  // namespace

Result<WavFormat> read_wav_header(ByteReader& file) {
  std::array<std::uint8_t, 12> head{};
  auto got = file.read(head);
  if (!got) return got.error();
  if (got.value() == 0) return bad_header(file, "the file is empty", "name a recording");
  const auto is = [](const std::uint8_t* at, const char* name) { return std::memcmp(at, name, 4) == 0; };
  if (got.value() < head.size() || (!is(head.data(), "RIFF") && !is(head.data(), "RF64")) ||
      !is(head.data() + 8, "WAVE")) {
    return bad_header(file, "this is no WAV file",
                      "a WAV file begins with RIFF (or RF64), its size, and WAVE");
  }
  std::optional<WavFormat> format;
  std::optional<std::int64_t> long_size;
  constexpr std::uint32_t kUnknown = 0xffffffff;
  for (;;) {
    std::array<std::uint8_t, 8> chunk{};
    got = file.read(chunk);
    if (!got) return got.error();
    if (got.value() < chunk.size())
      return bad_header(file, "the file ends before its samples begin", "the header is cut short");
    const auto size = little_endian<std::uint32_t>(chunk.data() + 4);
    if (is(chunk.data(), "data")) {
      if (!format) return bad_header(file, "the samples come before their format", "the file is damaged");
      if (size == kUnknown && long_size) {
        format->data_bytes = long_size;
      } else if (size != kUnknown && size != 0) {
        format->data_bytes = size;
      }
      return *format;
    }
    const std::int64_t padded = static_cast<std::int64_t>(size) + (size & 1U);
    if (is(chunk.data(), "fmt ") || is(chunk.data(), "ds64")) {
      std::array<std::uint8_t, 64> body{};
      const std::size_t part = std::min<std::size_t>(size, body.size());
      got = file.read(std::span(body).first(part));
      if (!got) return got.error();
      if (got.value() < part) return bad_header(file, "the header is cut short", "the file is damaged");
      if (is(chunk.data(), "fmt ")) {
        const auto parsed = parse_format(file, std::span<const std::uint8_t>(body).first(part));
        if (!parsed) return parsed.error();
        format = parsed.value();
      } else if (part >= 16) {
        const auto bytes = little_endian<std::uint64_t>(body.data() + 8);
        long_size = static_cast<std::int64_t>(
            std::min<std::uint64_t>(bytes, std::numeric_limits<std::int64_t>::max()));
      }
      if (auto done = file.skip(padded - static_cast<std::int64_t>(part)); !done) return done.error();
    } else if (auto done = file.skip(padded); !done) {
      return done.error();
    }
  }
}

Result<std::unique_ptr<Source>> open_wav(const config::RecordingSettings& settings,
                                         const std::vector<config::ChannelSettings>& channels) {
  auto file = ByteReader::open(settings.path);
  if (!file) return file.error();
  const auto format = read_wav_header(file.value());
  if (!format) return format.error();
  const auto columns =
      columns_for(channels, std::vector<std::string>(format.value().channels), settings.path);
  if (!columns) return columns.error();
  return std::unique_ptr<Source>(std::make_unique<WavSource>(std::move(file).value(), format.value(),
                                                             settings, channels, columns.value()));
}

}  // namespace tramline::acquire
