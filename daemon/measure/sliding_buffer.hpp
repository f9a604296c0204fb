#pragma once

#include <algorithm>
#include <cassert>
#include <cstddef>
#include <cstdint>
#include <vector>

namespace tramline::measure {

/// The last elements of a stream, contiguous in memory and addressed by their number in the stream.
///
/// Holds at least the last `keep` elements before each `extend()`. Allocates once, when constructed.
template <class T>
class SlidingBuffer {
 public:
  /// `most_at_once` bounds a single `extend()`.
  SlidingBuffer(std::size_t keep, std::size_t most_at_once)
      : keep_(keep), most_at_once_(most_at_once), held_(4 * keep + most_at_once) {}

  /// Forgets everything; the next element has the number `index`.
  void restart(std::int64_t index) {
    first_ = index;
    size_ = 0;
  }

  /// Room for `n` new elements at the end, for the caller to fill at once. Pointers from before are void.
  T* extend(std::size_t n) {
    assert(n <= most_at_once_);
    if (size_ + n > held_.size()) {
      const std::size_t drop = size_ - std::min(size_, keep_);
      std::copy(held_.begin() + static_cast<std::ptrdiff_t>(drop),
                held_.begin() + static_cast<std::ptrdiff_t>(size_), held_.begin());
      first_ += static_cast<std::int64_t>(drop);
      size_ -= drop;
    }
    size_ += n;
    return held_.data() + (size_ - n);
  }

  /// Element number `i` and those after it; `i` may be `end()`.
  [[nodiscard]] const T* at(std::int64_t i) const {
    assert(i >= begin() && i <= end());
    return held_.data() + (i - first_);
  }
  [[nodiscard]] std::int64_t begin() const { return first_; }
  [[nodiscard]] std::int64_t end() const { return first_ + static_cast<std::int64_t>(size_); }
  [[nodiscard]] std::size_t most_at_once() const { return most_at_once_; }

 private:
  std::size_t keep_;
  std::size_t most_at_once_;
  std::vector<T> held_;
  std::int64_t first_ = 0;
  std::size_t size_ = 0;
};

}  // namespace tramline::measure
