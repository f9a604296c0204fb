#pragma once

#include <memory>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/byte_reader.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// What a WAV file's header says of the samples that follow it.
struct WavFormat {
  enum class Encoding { pcm16, pcm24, pcm32, float32 };
  Encoding encoding = Encoding::pcm16;
  std::size_t channels = 0;
  double rate_hz = 0.0;
  std::size_t frame_bytes = 0;
  std::optional<std::int64_t> data_bytes;  ///< nothing: to the end of the file
};

/// Reads a RIFF/WAVE or RF64 header and leaves the reader at the first sample. PCM of 16, 24 and 32 bits and
/// 32-bit float, also by WAVE_FORMAT_EXTENSIBLE; chunks of other kinds are skipped.
[[nodiscard]] Result<WavFormat> read_wav_header(ByteReader& file);

/// A WAV file as a source. raw is the sample as a share of full scale, -1 to 1. A PCM sample at full scale is
/// over-range. A WAV file has no time of its own.
[[nodiscard]] Result<std::unique_ptr<Source>> open_wav(const config::RecordingSettings& settings,
                                                       const std::vector<config::ChannelSettings>& channels);

}  // namespace tramline::acquire
