#include "daemon/acquire/iio_buffer.hpp"

#include <poll.h>

#include <cerrno>
#include <condition_variable>
#include <mutex>
#include <thread>
#include <utility>

namespace tramline::acquire {
namespace {

constexpr std::chrono::milliseconds kLookAtStopEvery(100);

struct BufferDeleter {
  void operator()(iio_buffer* buffer) const { iio_buffer_destroy(buffer); }
};
using OwnedBuffer = std::unique_ptr<iio_buffer, BufferDeleter>;

/// What a refill gave; EAGAIN is no error, but nothing.
IioBuffer::Refill refilled(ssize_t given) {
  IioBuffer::Refill refill;
  if (given > 0) {
    refill.bytes = given;
    stamp(refill.came);
  } else if (given < 0 && given != -EAGAIN) {
    refill.error = static_cast<int>(-given);
  }
  return refill;
}

class PolledBuffer : public IioBuffer {
 public:
  PolledBuffer(OwnedBuffer buffer, int descriptor) : buffer_(std::move(buffer)), descriptor_(descriptor) {}

  Refill wait(std::chrono::milliseconds at_most) override {
    pollfd waiting{descriptor_, POLLIN, 0};
    const int ready = poll(&waiting, 1, static_cast<int>(at_most.count()));
    Refill refill;
    if (ready < 0 && errno != EINTR) refill.error = errno;
    if (ready <= 0) return refill;
    refill = refilled(iio_buffer_refill(buffer_.get()));
    // Else a device that is gone would be asked again at once, and for ever.
    if (refill.bytes == 0 && refill.error == 0 && (waiting.revents & (POLLERR | POLLHUP | POLLNVAL)) != 0)
      refill.error = ENODEV;
    return refill;
  }
  [[nodiscard]] iio_buffer* buffer() const override { return buffer_.get(); }

 private:
  OwnedBuffer buffer_;
  int descriptor_;
};

/// The buffer belongs to the thread while `turn_` is `refilling`, else to the caller.
class AwaitedBuffer : public IioBuffer {
 public:
  explicit AwaitedBuffer(OwnedBuffer buffer)
      : buffer_(std::move(buffer)), thread_([this] { refill_when_asked(); }) {}
  ~AwaitedBuffer() override {
    {
      const std::lock_guard guard(lock_);
      turn_ = Turn::over;
    }
    changed_.notify_all();
    iio_buffer_cancel(buffer_.get());
    thread_.join();
  }
  AwaitedBuffer(const AwaitedBuffer&) = delete;
  AwaitedBuffer& operator=(const AwaitedBuffer&) = delete;

  Refill wait(std::chrono::milliseconds at_most) override {
    std::unique_lock guard(lock_);
    if (turn_ == Turn::idle) {
      turn_ = Turn::refilling;
      changed_.notify_all();
    }
    if (!changed_.wait_for(guard, at_most, [this] { return turn_ == Turn::refilled; })) return {};
    turn_ = Turn::idle;
    return std::move(refill_);
  }
  [[nodiscard]] iio_buffer* buffer() const override { return buffer_.get(); }

 private:
  enum class Turn { idle, refilling, refilled, over };

  void refill_when_asked() {
    std::unique_lock guard(lock_);
    for (;;) {
      changed_.wait(guard, [this] { return turn_ == Turn::refilling || turn_ == Turn::over; });
      if (turn_ == Turn::over) return;
      guard.unlock();
      Refill refill = refilled(iio_buffer_refill(buffer_.get()));
      guard.lock();
      if (turn_ == Turn::over) return;
      refill_ = std::move(refill);
      turn_ = Turn::refilled;
      changed_.notify_all();
    }
  }

  OwnedBuffer buffer_;
  std::mutex lock_;
  std::condition_variable changed_;
  Turn turn_ = Turn::idle;
  Refill refill_;
  std::thread thread_;  // last: everything it uses is there when it starts
};

IioOpening connect(const std::string& uri) {
  errno = 0;
  IioOpening opening;
  opening.context.reset(iio_create_context_from_uri(uri.c_str()));
  if (!opening.context) opening.error = errno != 0 ? errno : EIO;
  return opening;
}

}  // namespace

IioOpening open_iio_context(const std::string& uri, const std::atomic<bool>& stop) {
  if (uri.starts_with("local:")) return connect(uri);
  // libiio's connecting cannot be called off. Its thread is left to itself where nobody waits for it any
  // more.
  struct Meeting {
    std::mutex lock;
    std::condition_variable changed;
    bool connected = false;
    IioOpening opening;
  };
  const auto meeting = std::make_shared<Meeting>();
  std::thread([meeting, uri] {
    IioOpening opening = connect(uri);
    const std::lock_guard guard(meeting->lock);
    meeting->opening = std::move(opening);
    meeting->connected = true;
    meeting->changed.notify_all();
  }).detach();
  std::unique_lock guard(meeting->lock);
  while (!stop) {
    if (meeting->changed.wait_for(guard, kLookAtStopEvery, [&] { return meeting->connected; }))
      return std::move(meeting->opening);
  }
  return {nullptr, EINTR};
}

IioBufferOpening open_iio_buffer(const iio_device* device, std::size_t frames) {
  errno = 0;
  OwnedBuffer buffer(iio_device_create_buffer(device, frames, false));
  if (!buffer) return {nullptr, errno != 0 ? errno : EIO};
  const int descriptor = iio_buffer_get_poll_fd(buffer.get());
  if (descriptor >= 0 && iio_buffer_set_blocking_mode(buffer.get(), false) == 0)
    return {std::make_unique<PolledBuffer>(std::move(buffer), descriptor), 0};
  return {std::make_unique<AwaitedBuffer>(std::move(buffer)), 0};
}

}  // namespace tramline::acquire
