#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

/// How a sound interface may write one sample, little-endian, the best first.
enum class SoundFormat {
  s32,    ///< 4 bytes
  s24,    ///< the lower three of 4 bytes
  s24_3,  ///< 3 bytes
  f32,    ///< IEEE 754
  s16,    ///< 2 bytes
};

[[nodiscard]] std::size_t bytes_a_sample(SoundFormat format);
/// "24 bit", …
[[nodiscard]] std::string_view name_of(SoundFormat format);

/// At or above this a sample counts as over-range: the full-scale code of 16 bits, 30 millionths below full
/// scale for any format. An interface may have fewer bits than its format has room for, so that its highest
/// code is not the format's.
inline constexpr float kSoundFullScale = 32'767.0F / 32'768.0F;

/// Appends `frames` interleaved frames of `width` samples to `arrival`: of each the samples `columns`, ±1 at
/// full scale. `bytes` holds at least `frames` × `width` samples.
void append_sound(std::span<const std::uint8_t> bytes, SoundFormat format, std::size_t width,
                  const std::vector<std::size_t>& columns, std::size_t frames, Arrival& arrival);

/// The capture devices in the text of /proc/asound/pcm, as ALSA calls them: "hw:1,0 (USB Audio)".
[[nodiscard]] std::vector<std::string> capture_devices(std::string_view proc_asound_pcm);

}  // namespace tramline::acquire
