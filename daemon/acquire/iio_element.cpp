#include "daemon/acquire/iio_element.hpp"

#include <array>
#include <bit>
#include <cmath>
#include <cstddef>

namespace tramline::acquire {
namespace {

constexpr unsigned kMostRepeats = 16;  // a quaternion has four, a rotation matrix nine

}  // namespace

Result<IioElement> IioElement::of(const iio_channel* channel, const std::string& where) {
  const iio_data_format& format = *iio_channel_get_data_format(channel);
  IioElement element;
  element.text_ = (format.is_be ? "be:" : "le:") + std::string(format.is_signed ? "s" : "u") +
                  std::to_string(format.bits) + "/" + std::to_string(format.length) +
                  (format.repeat > 1 ? "X" + std::to_string(format.repeat) : "") + ">>" +
                  std::to_string(format.shift);
  const bool whole_bytes = format.length % 8 == 0 && format.length >= 8 && format.length <= 64;
  if (!whole_bytes || format.bits < 1 || format.bits > format.length ||
      format.shift > format.length - format.bits || format.repeat > kMostRepeats) {
    return Error{where, "its samples have a format that cannot be read: " + element.text_,
                 "this is a fault of the converter's driver; tell its makers"};
  }
  element.channel_ = channel;
  element.storage_bits_ = format.length;
  element.repeat_ = format.repeat > 1 ? format.repeat : 1;
  element.signed_ = format.is_signed;
  const int bits = static_cast<int>(format.bits);
  element.lowest_ = format.is_signed ? -std::ldexp(1.0, bits - 1) : 0.0;
  element.highest_ = std::ldexp(1.0, format.is_signed ? bits - 1 : bits) - 1.0;
  return element;
}

std::int64_t IioElement::bits_at(const void* sample) const {
  // libiio converts all repeats, each in its storage, to this machine's order of bytes.
  std::array<std::byte, kMostRepeats * 8> converted;
  iio_channel_convert(channel_, converted.data(), sample);
  static_assert(std::endian::native == std::endian::little);
  std::uint64_t bits = 0;
  for (unsigned i = 0; i < storage_bits_ / 8; ++i)
    bits |= std::to_integer<std::uint64_t>(converted[i]) << (8 * i);
  if (signed_ && storage_bits_ < 64 && (bits >> (storage_bits_ - 1) & 1U) != 0)
    bits |= ~std::uint64_t{0} << storage_bits_;
  return static_cast<std::int64_t>(bits);
}

}  // namespace tramline::acquire
