#pragma once

#include <iio.h>

#include <atomic>
#include <chrono>
#include <cstdint>
#include <memory>
#include <string>

#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

struct IioContextDeleter {
  void operator()(iio_context* context) const { iio_context_destroy(context); }
};
using IioContext = std::unique_ptr<iio_context, IioContextDeleter>;

/// What a call of libiio came to: an errno, 0 for success.
struct IioOpening {
  IioContext context;
  int error = 0;
};

/// Connects to `uri`. Of a context that is not local, which may take as long as the network does, it waits
/// only until `stop`.
[[nodiscard]] IioOpening open_iio_context(const std::string& uri, const std::atomic<bool>& stop);

/// A capture buffer of libiio that is waited for no longer than told. The context must outlive it.
class IioBuffer {
 public:
  /// What a wait came to: `bytes` > 0 lie in `buffer()`, until the next `wait()`; or none came; or `error`.
  struct Refill {
    std::int64_t bytes = 0;
    int error = 0;  ///< an errno
    Arrival came;   ///< only its times: when the bytes were there
  };

  virtual ~IioBuffer() = default;
  [[nodiscard]] virtual Refill wait(std::chrono::milliseconds at_most) = 0;
  [[nodiscard]] virtual iio_buffer* buffer() const = 0;
};

struct IioBufferOpening {
  std::unique_ptr<IioBuffer> buffer;
  int error = 0;
};

/// Starts the capture of the enabled channels of `device`, `frames` a transfer. Where libiio can poll (a
/// local context) it is polled; where it cannot, a thread waits for the frames and is called off at the end.
[[nodiscard]] IioBufferOpening open_iio_buffer(const iio_device* device, std::size_t frames);

}  // namespace tramline::acquire
