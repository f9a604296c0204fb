#include "config/meter_register.hpp"

#include <bit>
#include <charconv>
#include <string>

namespace tramline::config {
namespace {

constexpr const char* kForm =
    "a register is TABLE:ADDRESS:TYPE, TABLE holding or input, ADDRESS 0 to 65535, TYPE u16, s16, u32, s32 "
    "or "
    "f32, the last three with -swapped if the less significant half comes first; such as input:0:f32";

Error fault(std::string what) {
  return {"", std::move(what), kForm};
}

}  // namespace

double MeterRegister::value(const std::uint16_t* registers) const {
  if (type == Type::u16) return registers[0];
  if (type == Type::s16) return static_cast<std::int16_t>(registers[0]);
  const std::uint32_t high = registers[swapped ? 1 : 0];
  const std::uint32_t low = registers[swapped ? 0 : 1];
  const std::uint32_t both = high << 16 | low;
  if (type == Type::u32) return both;
  if (type == Type::s32) return static_cast<std::int32_t>(both);
  return static_cast<double>(std::bit_cast<float>(both));
}

Result<MeterRegister> parse_meter_register(std::string_view text) {
  if (text.empty()) return fault("it names no register");
  const std::size_t first = text.find(':');
  const std::size_t second = first == std::string_view::npos ? first : text.find(':', first + 1);
  if (second == std::string_view::npos) return fault("it is not of the form TABLE:ADDRESS:TYPE");
  MeterRegister found;
  const std::string_view table = text.substr(0, first);
  if (table != "holding" && table != "input") return fault("\"" + std::string(table) + "\" is no table");
  found.table = table == "holding" ? MeterRegister::Table::holding : MeterRegister::Table::input;

  const std::string_view address = text.substr(first + 1, second - first - 1);
  const auto read = std::from_chars(address.data(), address.data() + address.size(), found.address);
  if (read.ec != std::errc() || read.ptr != address.data() + address.size())
    return fault("\"" + std::string(address) + "\" is no address");

  std::string_view type = text.substr(second + 1);
  constexpr std::string_view kSwapped = "-swapped";
  if (type.ends_with(kSwapped)) {
    found.swapped = true;
    type.remove_suffix(kSwapped.size());
  }
  if (type == "u16") {
    found.type = MeterRegister::Type::u16;
  } else if (type == "s16") {
    found.type = MeterRegister::Type::s16;
  } else if (type == "u32") {
    found.type = MeterRegister::Type::u32;
  } else if (type == "s32") {
    found.type = MeterRegister::Type::s32;
  } else if (type == "f32") {
    found.type = MeterRegister::Type::f32;
  } else {
    return fault("\"" + std::string(type) + "\" is no type");
  }
  if (found.swapped && found.words() == 1) return fault("one register has no halves to swap");
  if (found.words() == 2 && found.address == 65'535) return fault("two registers do not fit at 65535");
  return found;
}

}  // namespace tramline::config
