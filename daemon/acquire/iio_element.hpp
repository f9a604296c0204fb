#pragma once

#include <iio.h>

#include <cstddef>
#include <cstdint>
#include <string>

#include "config/result.hpp"

namespace tramline::acquire {

/// One channel's sample in a scan: how its bits become a count
/// (`[be|le]:[s|u]bits/storagebits[Xrepeat][>>shift]` of the kernel's IIO buffers). libiio puts the bits in
/// order; this adds what it does not: sign and width of the result, and the codes at which the converter
/// stands at its limit. Of repeated values the first is taken.
class IioElement {
 public:
  /// An Error, with `where` as its place, if the format is none that a scan can have.
  [[nodiscard]] static Result<IioElement> of(const iio_channel* channel, const std::string& where);

  /// The bits at `sample`, which may stand anywhere: two's complement if signed.
  [[nodiscard]] std::int64_t bits_at(const void* sample) const;
  [[nodiscard]] double count_at(const void* sample) const {
    const std::int64_t bits = bits_at(sample);
    return signed_ ? static_cast<double>(bits) : static_cast<double>(static_cast<std::uint64_t>(bits));
  }
  /// The lowest and the highest code of the format.
  [[nodiscard]] double lowest() const { return lowest_; }
  [[nodiscard]] double highest() const { return highest_; }
  /// In a scan, all repeats together.
  [[nodiscard]] std::size_t bytes() const { return std::size_t{storage_bits_} / 8 * repeat_; }
  [[nodiscard]] unsigned repeat() const { return repeat_; }
  /// "be:s24/32>>8"
  [[nodiscard]] const std::string& text() const { return text_; }

 private:
  const iio_channel* channel_ = nullptr;
  unsigned storage_bits_ = 0;
  unsigned repeat_ = 1;
  bool signed_ = false;
  double lowest_ = 0.0;
  double highest_ = 0.0;
  std::string text_;
};

/// Bytes from one scan to the next, of scans that end `packed_bytes` after their begin and whose longest
/// element has `longest_bytes`: the kernel (since 5.6) pads scans to a multiple of that, which libiio 0.24
/// leaves out where a shorter element comes last.
[[nodiscard]] constexpr std::size_t scan_bytes(std::size_t packed_bytes, std::size_t longest_bytes) {
  return (packed_bytes + longest_bytes - 1) / longest_bytes * longest_bytes;
}

/// What turns counts into volts at the converter: its attributes are in millivolts.
struct IioScale {
  double scale_mv = 1000.0;  ///< of one count
  double offset = 0.0;       ///< counts, added first
  [[nodiscard]] double volts(double count) const { return (count + offset) * scale_mv / 1000.0; }
};

}  // namespace tramline::acquire
