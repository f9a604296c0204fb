#pragma once

#include <cstring>

namespace tramline::measure {

/// Four floats computed side by side: one SSE or NEON register where there is one, four scalars elsewhere.
/// Written out, since compilers may not reorder sums of floats on their own, and so that the order is the
/// same everywhere.
using Lanes [[gnu::vector_size(16)]] = float;

inline Lanes load(const float* from) {
  Lanes lanes;
  std::memcpy(&lanes, from, sizeof lanes);
  return lanes;
}

inline void store(Lanes lanes, float* to) {
  std::memcpy(to, &lanes, sizeof lanes);
}

inline Lanes all(float value) {
  return Lanes{value, value, value, value};
}

inline float sum_of(Lanes lanes) {
  return (lanes[0] + lanes[2]) + (lanes[1] + lanes[3]);
}

/// The four sums, each added up in the order of `sum_of()`.
inline Lanes sums_of(Lanes a, Lanes b, Lanes c, Lanes d) {
  const Lanes ab = __builtin_shufflevector(a, b, 0, 4, 1, 5) + __builtin_shufflevector(a, b, 2, 6, 3, 7);
  const Lanes cd = __builtin_shufflevector(c, d, 0, 4, 1, 5) + __builtin_shufflevector(c, d, 2, 6, 3, 7);
  return __builtin_shufflevector(ab, cd, 0, 1, 4, 5) + __builtin_shufflevector(ab, cd, 2, 3, 6, 7);
}

}  // namespace tramline::measure
