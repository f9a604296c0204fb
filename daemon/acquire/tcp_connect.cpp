#include "daemon/acquire/tcp_connect.hpp"

#include <netdb.h>
#include <netinet/in.h>
#include <netinet/tcp.h>
#include <poll.h>
#include <sys/socket.h>
#include <unistd.h>

#include <cerrno>
#include <chrono>
#include <future>
#include <memory>
#include <system_error>
#include <thread>

namespace tramline::acquire {
namespace {

constexpr std::chrono::milliseconds kStep(100);
constexpr std::chrono::milliseconds kLookUpWithin(10'000);
constexpr std::chrono::milliseconds kConnectWithin(3000);

struct Freer {
  void operator()(addrinfo* found) const { freeaddrinfo(found); }
};
struct Lookup {
  int error = EAI_AGAIN;
  std::unique_ptr<addrinfo, Freer> found;
};

Lookup look_up(const std::string& host, const std::string& port, int flags) {
  addrinfo hints{};
  hints.ai_socktype = SOCK_STREAM;
  hints.ai_flags = AI_NUMERICSERV | flags;
  addrinfo* found = nullptr;
  Lookup lookup;
  lookup.error = getaddrinfo(host.c_str(), port.c_str(), &hints, &found);
  if (lookup.error == 0) lookup.found.reset(found);
  return lookup;
}

/// getaddrinfo() cannot be told to hurry: a thread that nobody waits for may ask on when it is not wanted any
/// more.
Lookup look_up_name(const std::string& host, const std::string& port, const std::atomic<bool>& stop) {
  std::packaged_task<Lookup()> task([host, port] { return look_up(host, port, 0); });
  std::future<Lookup> answer = task.get_future();
  try {
    std::thread(std::move(task)).detach();
  } catch (const std::system_error&) {
    return {};
  }
  for (auto waited = std::chrono::milliseconds(0); waited < kLookUpWithin && !stop; waited += kStep) {
    if (answer.wait_for(kStep) == std::future_status::ready) return answer.get();
  }
  return {};
}

/// 0, or why not.
int finish_connecting(int socket, const std::atomic<bool>& stop) {
  for (auto waited = std::chrono::milliseconds(0); waited < kConnectWithin && !stop; waited += kStep) {
    pollfd ready{socket, POLLOUT, 0};
    const int came = poll(&ready, 1, static_cast<int>(kStep.count()));
    if (came < 0 && errno != EINTR) return errno;
    if (came <= 0) continue;
    int error = 0;
    socklen_t size = sizeof error;
    return getsockopt(socket, SOL_SOCKET, SO_ERROR, &error, &size) == 0 ? error : errno;
  }
  return ETIMEDOUT;
}

Result<int> try_one(const addrinfo& address, const std::atomic<bool>& stop) {
  const int socket =
      ::socket(address.ai_family, address.ai_socktype | SOCK_NONBLOCK | SOCK_CLOEXEC, address.ai_protocol);
  int error = socket < 0 ? errno : 0;
  if (error == 0 && connect(socket, address.ai_addr, address.ai_addrlen) != 0)
    error = errno == EINPROGRESS ? finish_connecting(socket, stop) : errno;
  if (error == 0) {
    const int on = 1;  // both are only better
    setsockopt(socket, IPPROTO_TCP, TCP_NODELAY, &on, sizeof on);
    setsockopt(socket, SOL_SOCKET, SO_KEEPALIVE, &on, sizeof on);
    return socket;
  }
  if (socket >= 0) close(socket);
  return Error{"", std::error_code(error, std::generic_category()).message(), ""};
}

}  // namespace

Result<int> tcp_connect(const std::string& host, std::uint16_t port, const std::atomic<bool>& stop) {
  const std::string port_text = std::to_string(port);
  const std::string where = host + " port " + port_text;
  Lookup lookup = look_up(host, port_text, AI_NUMERICHOST);
  if (lookup.error != 0) lookup = look_up_name(host, port_text, stop);
  if (lookup.error != 0) {
    return Error{where, std::string("its address is not known (") + gai_strerror(lookup.error) + ")",
                 "give the address in figures in source.host, or see the machine's name server"};
  }
  std::string why = "stopped";
  for (const addrinfo* one = lookup.found.get(); one != nullptr && !stop; one = one->ai_next) {
    auto connected = try_one(*one, stop);
    if (connected) return connected;
    why = connected.error().what;
  }
  return Error{where, "cannot be reached (" + why + ")",
               "see that it is powered, on the network, and listens on that port"};
}

}  // namespace tramline::acquire
