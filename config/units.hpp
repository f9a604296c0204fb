#pragma once

#include <compare>
#include <cstdint>
#include <string_view>

/// Quantities that must never be swapped, as types of their own.
namespace tramline {

/// Nanoseconds since 1970-01-01T00:00:00Z. In an undated recording it counts from the recording's own begin.
struct UtcNs {
  std::int64_t value = 0;
  friend constexpr auto operator<=>(UtcNs, UtcNs) = default;
  friend constexpr UtcNs operator+(UtcNs t, std::int64_t ns) { return {t.value + ns}; }
  friend constexpr UtcNs operator-(UtcNs t, std::int64_t ns) { return {t.value - ns}; }
  friend constexpr std::int64_t operator-(UtcNs a, UtcNs b) { return a.value - b.value; }
};

/// The number of a sample (of all channels at once) since its source was opened; the first is 0.
struct SampleIndex {
  std::int64_t value = 0;
  friend constexpr auto operator<=>(SampleIndex, SampleIndex) = default;
  friend constexpr SampleIndex operator+(SampleIndex i, std::int64_t n) { return {i.value + n}; }
  friend constexpr SampleIndex operator-(SampleIndex i, std::int64_t n) { return {i.value - n}; }
  friend constexpr std::int64_t operator-(SampleIndex a, SampleIndex b) { return a.value - b.value; }
};

inline constexpr std::int64_t kNsPerSecond = 1'000'000'000;
inline constexpr std::int64_t kNsPerMillisecond = 1'000'000;

/// Which side of the regulator: `input` is the supply, `output` is what the load gets.
enum class Side : std::uint8_t { input = 0, output = 1 };
enum class Phase : std::uint8_t { l1 = 0, l2 = 1, l3 = 2 };

/// One channel is one phase of one side.
struct Channel {
  Side side = Side::input;
  Phase phase = Phase::l1;
  friend constexpr auto operator<=>(const Channel&, const Channel&) = default;
};

constexpr std::string_view name_of(Side side) {
  return side == Side::input ? std::string_view("input") : std::string_view("output");
}
constexpr std::string_view name_of(Phase phase) {
  return phase == Phase::l1   ? std::string_view("L1")
         : phase == Phase::l2 ? std::string_view("L2")
                              : std::string_view("L3");
}

}  // namespace tramline
