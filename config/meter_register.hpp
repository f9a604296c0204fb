#pragma once

#include <cstdint>
#include <string_view>

#include "config/result.hpp"

namespace tramline::config {

/// Where a polled meter keeps one value: `holding:100:u16`, `input:0:f32`, `input:0:f32-swapped`.
///
/// The address counts from 0, as it goes over the line. Values of 32 bits take two registers, the more
/// significant first; `-swapped`: the less significant first.
struct MeterRegister {
  enum class Table { holding, input };
  enum class Type { u16, s16, u32, s32, f32 };
  Table table = Table::input;
  std::uint16_t address = 0;
  Type type = Type::u16;
  bool swapped = false;

  [[nodiscard]] int words() const { return type == Type::u16 || type == Type::s16 ? 1 : 2; }
  /// The value of `words()` registers as they came.
  [[nodiscard]] double value(const std::uint16_t* registers) const;
};

/// Reads the text of a channel's `source_channel`.
[[nodiscard]] Result<MeterRegister> parse_meter_register(std::string_view text);

}  // namespace tramline::config
