#pragma once

#include <chrono>
#include <cstdint>
#include <memory>
#include <span>
#include <string>

#include "config/result.hpp"
#include "config/site.hpp"

namespace tramline::acquire {

/// What bytes come over: a serial line, a TCP connection, UDP datagrams. One thread.
class ByteLink {
 public:
  virtual ~ByteLink() = default;

  /// Waits for bytes, at most `at_most`; gives those that came (none: nothing came), which hold until the
  /// next call. An Error: the link is gone.
  virtual Result<std::span<const std::uint8_t>> receive(std::chrono::milliseconds at_most) = 0;

  /// Each piece is a datagram of its own, not a part of a stream.
  [[nodiscard]] virtual bool datagrams() const { return false; }
  /// Bytes of datagrams that came from somebody else than the first sender.
  [[nodiscard]] virtual std::int64_t strangers_bytes() const { return 0; }
  /// "/dev/ttyACM0", "192.168.7.2 port 4711"
  [[nodiscard]] virtual std::string what() const = 0;
};

/// Opens the link of a board. A TCP connection may not yet stand: `receive()` waits for it too.
[[nodiscard]] Result<std::unique_ptr<ByteLink>> open_link(const config::BoardSettings& settings);

}  // namespace tramline::acquire
