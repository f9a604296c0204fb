#include "daemon/acquire/sound_samples.hpp"

#include <algorithm>
#include <bit>
#include <cassert>
#include <charconv>
#include <cmath>

namespace tramline::acquire {
namespace {

/// `count` bytes, the least significant first, at the top of a word of 32 bits.
template <int count>
std::uint32_t left_justified(const std::uint8_t* bytes) {
  std::uint32_t word = 0;
  for (int i = 0; i < count; ++i)
    word |= std::uint32_t{bytes[i]} << (8 * (4 - count + i));
  return word;
}

float fraction(std::uint32_t word) {
  return static_cast<float>(std::ldexp(static_cast<double>(static_cast<std::int32_t>(word)), -31));
}

template <SoundFormat format>
float sample(const std::uint8_t* bytes) {
  if constexpr (format == SoundFormat::s16) return fraction(left_justified<2>(bytes));
  // Of S24 in four bytes the highest is undefined.
  if constexpr (format == SoundFormat::s24 || format == SoundFormat::s24_3)
    return fraction(left_justified<3>(bytes));
  if constexpr (format == SoundFormat::f32) return std::bit_cast<float>(left_justified<4>(bytes));
  return fraction(left_justified<4>(bytes));
}

template <SoundFormat format>
void append(const std::uint8_t* bytes, std::size_t width, const std::vector<std::size_t>& columns,
            std::size_t frames, Arrival& arrival) {
  const std::size_t size = bytes_a_sample(format);
  for (std::size_t i = 0; i < frames; ++i) {
    for (const std::size_t column : columns)
      arrival.values.push_back(sample<format>(bytes + (i * width + column) * size));
  }
}

void note_over_range(std::size_t first, std::size_t channels, Arrival& arrival) {
  for (std::size_t c = 0; c < channels; ++c) {
    std::size_t run = 0;
    for (std::size_t i = first; i < arrival.frames; ++i) {
      if (std::abs(arrival.values[i * channels + c]) >= kSoundFullScale) {
        ++run;
      } else if (run > 0) {
        arrival.over_range.push_back({c, i - run, run});
        run = 0;
      }
    }
    if (run > 0) arrival.over_range.push_back({c, arrival.frames - run, run});
  }
}

std::string_view trimmed(std::string_view text) {
  const std::size_t begin = text.find_first_not_of(' ');
  if (begin == std::string_view::npos) return {};
  return text.substr(begin, text.find_last_not_of(' ') - begin + 1);
}

/// "01-00" as "hw:1,0"; empty if it is not of that form.
std::string hardware_name(std::string_view numbers) {
  unsigned card = 0;
  unsigned device = 0;
  const char* end = numbers.data() + numbers.size();
  const auto first = std::from_chars(numbers.data(), end, card);
  if (first.ec != std::errc() || first.ptr == end || *first.ptr != '-') return {};
  const auto second = std::from_chars(first.ptr + 1, end, device);
  if (second.ec != std::errc() || second.ptr != end) return {};
  return "hw:" + std::to_string(card) + "," + std::to_string(device);
}

}  // namespace

std::size_t bytes_a_sample(SoundFormat format) {
  switch (format) {
    case SoundFormat::s24_3:
      return 3;
    case SoundFormat::s16:
      return 2;
    case SoundFormat::s32:
    case SoundFormat::s24:
    case SoundFormat::f32:
      break;
  }
  return 4;
}

std::string_view name_of(SoundFormat format) {
  switch (format) {
    case SoundFormat::s24:
    case SoundFormat::s24_3:
      return "24 bit";
    case SoundFormat::s16:
      return "16 bit";
    case SoundFormat::f32:
      return "32 bit floating point";
    case SoundFormat::s32:
      break;
  }
  return "32 bit";
}

void append_sound(std::span<const std::uint8_t> bytes, SoundFormat format, std::size_t width,
                  const std::vector<std::size_t>& columns, std::size_t frames, Arrival& arrival) {
  assert(bytes.size() >= frames * width * bytes_a_sample(format));
  switch (format) {
    case SoundFormat::s32:
      append<SoundFormat::s32>(bytes.data(), width, columns, frames, arrival);
      break;
    case SoundFormat::s24:
      append<SoundFormat::s24>(bytes.data(), width, columns, frames, arrival);
      break;
    case SoundFormat::s24_3:
      append<SoundFormat::s24_3>(bytes.data(), width, columns, frames, arrival);
      break;
    case SoundFormat::f32:
      append<SoundFormat::f32>(bytes.data(), width, columns, frames, arrival);
      break;
    case SoundFormat::s16:
      append<SoundFormat::s16>(bytes.data(), width, columns, frames, arrival);
      break;
  }
  const std::size_t first = arrival.frames;
  arrival.frames += frames;
  note_over_range(first, columns.size(), arrival);
}

std::vector<std::string> capture_devices(std::string_view proc_asound_pcm) {
  // "01-00: USB Audio : USB Audio : playback 1 : capture 1"
  std::vector<std::string> devices;
  while (!proc_asound_pcm.empty()) {
    const std::string_view line = proc_asound_pcm.substr(0, proc_asound_pcm.find('\n'));
    proc_asound_pcm.remove_prefix(std::min(line.size() + 1, proc_asound_pcm.size()));
    const std::size_t colon = line.find(':');
    if (colon == std::string_view::npos || line.find(": capture ") == std::string_view::npos) continue;
    std::string name = hardware_name(line.substr(0, colon));
    if (name.empty()) continue;
    std::string_view title = line.substr(colon + 1);
    title = trimmed(title.substr(0, title.find(" : ")));
    if (!title.empty()) name += " (" + std::string(title) + ")";
    devices.push_back(std::move(name));
  }
  return devices;
}

}  // namespace tramline::acquire
