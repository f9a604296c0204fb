#include "daemon/acquire/byte_link.hpp"

#include <sys/ioctl.h>

#include <array>
#include <boost/asio/connect.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/ip/udp.hpp>
#include <boost/asio/serial_port.hpp>
#include <cerrno>
#include <cstddef>
#include <optional>

namespace tramline::acquire {
namespace {

namespace asio = boost::asio;
using boost::system::error_code;
using Bytes = std::span<const std::uint8_t>;

/// What the links have in common: one read under way at a time, waited for a little at a time.
class AsioLink : public ByteLink {
 public:
  Result<Bytes> receive(std::chrono::milliseconds at_most) override {
    if (!reading_) {
      reading_ = true;
      done_ = false;
      begin_read();
    }
    loop_.restart();
    loop_.run_for(at_most);
    if (!done_) return Bytes();
    reading_ = false;
    if (error_) return gone(error_);
    return Bytes(buffer_.data(), received_);
  }
  [[nodiscard]] std::string what() const override { return what_; }

 protected:
  explicit AsioLink(std::string what) : what_(std::move(what)) {}
  /// Starts what ends in `finished()`.
  virtual void begin_read() = 0;
  [[nodiscard]] virtual Error gone(const error_code& error) const = 0;
  void finished(const error_code& error, std::size_t bytes) {
    error_ = error;
    received_ = bytes;
    done_ = true;
  }

  asio::io_context loop_;
  std::array<std::uint8_t, 65'536> buffer_{};
  std::string what_;

 private:
  bool reading_ = false;
  bool done_ = false;
  error_code error_;
  std::size_t received_ = 0;
};

class SerialLink : public AsioLink {
 public:
  explicit SerialLink(const config::BoardSettings& settings) : AsioLink(settings.device), port_(loop_) {}

  Status open(const config::BoardSettings& settings) {
    error_code error;
    port_.open(settings.device, error);
    if (error) return cannot_open(error);
    // Two programs on one line would each get half of the bytes.
    if (ioctl(port_.native_handle(), TIOCEXCL) != 0)
      return Error{what_, "cannot be taken for this program alone", "see that it is a serial port"};
    using Line = asio::serial_port_base;
    port_.set_option(Line::baud_rate(static_cast<unsigned>(settings.baud)), error);
    if (error) {
      return Error{what_, "does not do " + std::to_string(settings.baud) + " baud: " + error.message(),
                   "give a usual speed in source.baud, such as 115200 or 921600"};
    }
    port_.set_option(Line::character_size(8), error);
    if (!error) port_.set_option(Line::parity(Line::parity::none), error);
    if (!error) port_.set_option(Line::stop_bits(Line::stop_bits::one), error);
    if (!error) port_.set_option(Line::flow_control(Line::flow_control::none), error);
    if (error) return Error{what_, "cannot be set up: " + error.message(), "see that it is a serial port"};
    return kDone;
  }

 private:
  void begin_read() override {
    port_.async_read_some(asio::buffer(buffer_),
                          [this](const error_code& error, std::size_t bytes) { finished(error, bytes); });
  }
  [[nodiscard]] Error gone(const error_code& error) const override {
    return {what_, "the serial port is gone (" + error.message() + ")",
            "see that the board is plugged in and powered"};
  }
  [[nodiscard]] Error cannot_open(const error_code& error) const {
    switch (error.value()) {
      case ENOENT:
      case ENXIO:
      case ENODEV:
        return {what_, "there is no such serial port",
                "plug the board in, or see under /dev/serial/by-id what it is called"};
      case EACCES:
      case EPERM:
        return {what_, "this user may not open it", "add the user to the port's group, usually dialout"};
      case EBUSY:
        return {what_, "another program has it", "stop the other program"};
      default:
        return {what_, "cannot be opened: " + error.message(), "see that it is a serial port"};
    }
  }

  asio::serial_port port_;
};

class TcpLink : public AsioLink {
 public:
  explicit TcpLink(const config::BoardSettings& settings)
      : AsioLink(settings.host + " port " + std::to_string(settings.port)),
        host_(settings.host),
        port_(std::to_string(settings.port)),
        resolver_(loop_),
        socket_(loop_) {}

 private:
  using tcp = asio::ip::tcp;

  void begin_read() override {
    if (connected_) {
      read();
      return;
    }
    resolver_.async_resolve(
        host_, port_, [this](const error_code& error, const tcp::resolver::results_type& found) {
          if (error) return finished(error, 0);
          asio::async_connect(socket_, found, [this](const error_code& failed, const tcp::endpoint&) {
            if (failed) return finished(failed, 0);
            connected_ = true;
            error_code ignored;
            socket_.set_option(asio::socket_base::keep_alive(true), ignored);
            read();
          });
        });
  }
  void read() {
    socket_.async_read_some(asio::buffer(buffer_),
                            [this](const error_code& error, std::size_t bytes) { finished(error, bytes); });
  }
  [[nodiscard]] Error gone(const error_code& error) const override {
    return {what_, (connected_ ? "the connection is gone (" : "cannot be reached (") + error.message() + ")",
            "see that the box is powered, on the network, and listens on that port"};
  }

  std::string host_;
  std::string port_;
  tcp::resolver resolver_;
  tcp::socket socket_;
  bool connected_ = false;
};

class UdpLink : public AsioLink {
 public:
  explicit UdpLink(const config::BoardSettings& settings)
      : AsioLink("UDP port " + std::to_string(settings.port)), socket_(loop_) {}

  Status open(const config::BoardSettings& settings) {
    error_code error;
    const auto address = asio::ip::make_address(settings.host.empty() ? "127.0.0.1" : settings.host, error);
    if (error) {
      return Error{"source.host", "\"" + settings.host + "\" is no address",
                   "give an address of this machine in figures, such as 192.168.7.1"};
    }
    const udp::endpoint here(address, static_cast<std::uint16_t>(settings.port));
    socket_.open(here.protocol(), error);
    if (!error) socket_.bind(here, error);
    if (error) {
      return Error{what_, "cannot listen on " + address.to_string() + " (" + error.message() + ")",
                   "see that the address is this machine's and no other program has the port"};
    }
    error_code ignored;  // a larger buffer is only better
    socket_.set_option(asio::socket_base::receive_buffer_size(1 << 20), ignored);
    return kDone;
  }
  [[nodiscard]] bool datagrams() const override { return true; }
  [[nodiscard]] std::int64_t strangers_bytes() const override { return strangers_bytes_; }

 private:
  using udp = asio::ip::udp;

  void begin_read() override {
    socket_.async_receive_from(asio::buffer(buffer_), sender_,
                               [this](const error_code& error, std::size_t bytes) {
                                 if (!error && box_ && *box_ != sender_.address()) {
                                   strangers_bytes_ += static_cast<std::int64_t>(bytes);
                                   begin_read();
                                   return;
                                 }
                                 if (!error) box_ = sender_.address();
                                 finished(error, bytes);
                               });
  }
  [[nodiscard]] Error gone(const error_code& error) const override {
    return {what_, "cannot be listened on any more (" + error.message() + ")", "see the machine's network"};
  }

  udp::socket socket_;
  udp::endpoint sender_;
  std::optional<asio::ip::address> box_;
  std::int64_t strangers_bytes_ = 0;
};

template <class Link>
Result<std::unique_ptr<ByteLink>> opened(std::unique_ptr<Link> link, const config::BoardSettings& settings) {
  if (auto done = link->open(settings); !done) return done.error();
  return std::unique_ptr<ByteLink>(std::move(link));
}

}  // namespace

Result<std::unique_ptr<ByteLink>> open_link(const config::BoardSettings& settings) {
  switch (settings.link) {
    case config::BoardSettings::Link::serial:
      return opened(std::make_unique<SerialLink>(settings), settings);
    case config::BoardSettings::Link::udp:
      return opened(std::make_unique<UdpLink>(settings), settings);
    case config::BoardSettings::Link::tcp:
      break;
  }
  return std::unique_ptr<ByteLink>(std::make_unique<TcpLink>(settings));
}

}  // namespace tramline::acquire
