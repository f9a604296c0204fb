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

}  // namespace tramline::measure
