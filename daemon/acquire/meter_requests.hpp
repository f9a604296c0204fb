#pragma once

#include <cstddef>
#include <cstdint>
#include <vector>

#include "config/meter_register.hpp"

namespace tramline::acquire {

/// A stretch of registers that is asked for at once.
struct MeterRequest {
  config::MeterRegister::Table table = config::MeterRegister::Table::input;
  std::uint16_t address = 0;
  int words = 0;
  std::vector<std::size_t> registers;  ///< those of the wanted ones that lie in it
};

/// The fewest requests that cover `wanted` and nothing else, by table and address: registers that touch or
/// overlap go together, up to `most_words` (at least 2).
///
/// What lies between two registers is never asked for: a meter may refuse a request for what it does not
/// have.
[[nodiscard]] std::vector<MeterRequest> requests_for(const std::vector<config::MeterRegister>& wanted,
                                                     int most_words);

}  // namespace tramline::acquire
