#pragma once

#include <fcntl.h>
#include <gtest/gtest.h>
#include <modbus/modbus.h>
#include <netinet/in.h>
#include <poll.h>
#include <stdlib.h>
#include <sys/eventfd.h>
#include <sys/socket.h>
#include <unistd.h>

#include <cerrno>
#include <cstdint>
#include <deque>
#include <functional>
#include <mutex>
#include <ostream>
#include <string>
#include <thread>
#include <utility>
#include <vector>

/// Modbus servers for tests, by libmodbus, on a thread of their own.
namespace tramline::acquire {

/// What the server does with a question; the default is to answer from its registers.
struct Reaction {
  enum class Kind { answer, exception, bytes, silence, hang_up };
  Kind kind = Kind::answer;
  unsigned exception = 0;
  /// After the address of the unit, in place of an answer. TCP: with a head that fits the question; RTU: as
  /// it is.
  std::vector<std::uint8_t> bytes;
  int transaction = 0;  ///< TCP: added to the transaction's number
};
inline Reaction exception(unsigned code) {
  return {Reaction::Kind::exception, code, {}, 0};
}
inline Reaction silence() {
  return {Reaction::Kind::silence, 0, {}, 0};
}
inline Reaction hang_up() {
  return {Reaction::Kind::hang_up, 0, {}, 0};
}
inline Reaction raw(std::vector<std::uint8_t> bytes, int transaction = 0) {
  return {Reaction::Kind::bytes, 0, std::move(bytes), transaction};
}

/// A question as it came.
struct Question {
  int unit = 0;
  int function = 0;
  int address = 0;
  int count = 0;
  bool operator==(const Question&) const = default;
};
inline void PrintTo(const Question& question, std::ostream* out) {
  *out << "unit " << question.unit << " function " << question.function << " address " << question.address
       << " count " << question.count;
}

/// What TCP and RTU have in common. All registers of `kRegisters` are there and 0 at first.
class MeterServer {
 public:
  static constexpr int kRegisters = 1000;
  MeterServer(const MeterServer&) = delete;
  MeterServer& operator=(const MeterServer&) = delete;

  void set_input(int address, std::vector<std::uint16_t> words) {
    set(map_->tab_input_registers, address, words);
  }
  void set_holding(int address, std::vector<std::uint16_t> words) {
    set(map_->tab_registers, address, words);
  }
  /// What to do with the questions that come next, in their order.
  void next(std::deque<Reaction> reactions) {
    const std::lock_guard guard(lock_);
    next_ = std::move(reactions);
  }
  /// What to do with each question there is nothing in `next` for.
  void always(std::function<Reaction(const Question&)> reaction) {
    const std::lock_guard guard(lock_);
    always_ = std::move(reaction);
  }
  std::vector<Question> questions() {
    const std::lock_guard guard(lock_);
    return questions_;
  }
  /// Closes the line now, without a question.
  void close_line() { signal(leave_); }
  /// The last one, as bytes from the function's code on.
  std::vector<std::uint8_t> last_question() {
    const std::lock_guard guard(lock_);
    return last_question_;
  }

 protected:
  MeterServer()
      : stop_(eventfd(0, EFD_CLOEXEC)),
        leave_(eventfd(0, EFD_CLOEXEC | EFD_NONBLOCK)),
        map_(modbus_mapping_new(0, 0, kRegisters, kRegisters)) {}
  ~MeterServer() {
    close(stop_);
    close(leave_);
    modbus_mapping_free(map_);
  }
  void begin(modbus_t* modbus, std::function<void()> run) {
    modbus_ = modbus;
    thread_ = std::thread(std::move(run));
  }
  void end() {
    signal(stop_);
    if (thread_.joinable()) thread_.join();
  }
  /// Waits until `fd` can be read; false: it is to stop or to leave, or nobody is there.
  [[nodiscard]] bool wait_for(int fd) const {
    pollfd ready[] = {{fd, POLLIN, 0}, {stop_, POLLIN, 0}, {leave_, POLLIN, 0}};
    while (poll(ready, 3, -1) < 0) {
    }
    std::uint64_t times = 0;
    if (read(leave_, &times, sizeof times) > 0) return false;
    return ready[1].revents == 0 && (ready[0].revents & POLLIN) != 0;
  }
  /// Answers the questions that come over the line until it is closed.
  void serve() {
    const int head = modbus_get_header_length(modbus_);
    std::uint8_t question[MODBUS_TCP_MAX_ADU_LENGTH];
    while (wait_for(modbus_get_socket(modbus_))) {
      const int length = modbus_receive(modbus_, question);
      if (length < 0 && errno < MODBUS_ENOBASE && errno != ETIMEDOUT) return;
      if (length < head + 5) continue;
      const Reaction reaction = react_to(question, head);
      switch (reaction.kind) {
        case Reaction::Kind::answer: {
          const std::lock_guard guard(lock_);
          modbus_reply(modbus_, question, length, map_);
          break;
        }
        case Reaction::Kind::exception:
          modbus_reply_exception(modbus_, question, reaction.exception);
          break;
        case Reaction::Kind::bytes:
          send_bytes(reaction, question, head);
          break;
        case Reaction::Kind::silence:
          break;
        case Reaction::Kind::hang_up:
          return;
      }
    }
  }
  modbus_t* modbus_ = nullptr;

 private:
  static void signal(int event) {
    const std::uint64_t one = 1;
    EXPECT_EQ(write(event, &one, sizeof one), static_cast<ssize_t>(sizeof one));
  }
  void set(std::uint16_t* table, int address, const std::vector<std::uint16_t>& words) {
    const std::lock_guard guard(lock_);
    for (std::size_t i = 0; i < words.size(); ++i)
      table[static_cast<std::size_t>(address) + i] = words[i];
  }
  Reaction react_to(const std::uint8_t* question, int head) {
    const auto word = [&](int at) { return question[head + at] << 8 | question[head + at + 1]; };
    const std::lock_guard guard(lock_);
    const Question asked{question[head - 1], question[head], word(1), word(3)};
    questions_.push_back(asked);
    last_question_.assign(question + head, question + head + 5);
    if (!next_.empty()) {
      const Reaction reaction = next_.front();
      next_.pop_front();
      return reaction;
    }
    return always_ ? always_(asked) : Reaction{};
  }
  void send_bytes(const Reaction& reaction, const std::uint8_t* question, int head) const {
    std::vector<std::uint8_t> bytes(question, question + head);
    if (head > 1) {  // Modbus TCP: transaction, protocol, length, unit
      const int transaction = (question[0] << 8 | question[1]) + reaction.transaction;
      bytes[0] = static_cast<std::uint8_t>(transaction >> 8);
      bytes[1] = static_cast<std::uint8_t>(transaction);
      bytes[4] = 0;
      bytes[5] = static_cast<std::uint8_t>(reaction.bytes.size() + 1);
    }
    bytes.insert(bytes.end(), reaction.bytes.begin(), reaction.bytes.end());
    EXPECT_EQ(write(modbus_get_socket(modbus_), bytes.data(), bytes.size()),
              static_cast<ssize_t>(bytes.size()));
  }

  int stop_;
  int leave_;
  modbus_mapping_t* map_;
  std::mutex lock_;
  std::deque<Reaction> next_;
  std::function<Reaction(const Question&)> always_;
  std::vector<Question> questions_;
  std::vector<std::uint8_t> last_question_;
  std::thread thread_;
};

/// On loopback, at a port of its own; takes one connection after the other.
class TcpMeterServer : public MeterServer {
 public:
  TcpMeterServer() {
    modbus_t* modbus = modbus_new_tcp("127.0.0.1", 0);
    listener_ = modbus_tcp_listen(modbus, 1);
    EXPECT_GE(listener_, 0);
    sockaddr_in address{};
    socklen_t size = sizeof address;
    EXPECT_EQ(getsockname(listener_, reinterpret_cast<sockaddr*>(&address), &size), 0);
    port_ = ntohs(address.sin_port);
    begin(modbus, [this] {
      while (wait_for(listener_)) {
        if (modbus_tcp_accept(modbus_, &listener_) < 0) return;
        serve();
        modbus_close(modbus_);
      }
    });
  }
  ~TcpMeterServer() {
    end();
    close(listener_);
    modbus_free(modbus_);
  }
  [[nodiscard]] std::uint16_t port() const { return port_; }

 private:
  int listener_ = -1;
  std::uint16_t port_ = 0;
};

/// On a pseudo-terminal, for one who opens it; hanging up takes the terminal away.
class RtuMeterServer : public MeterServer {
 public:
  explicit RtuMeterServer(int unit = 1) {
    const int terminal = posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC);
    EXPECT_GE(terminal, 0);
    EXPECT_EQ(grantpt(terminal), 0);
    EXPECT_EQ(unlockpt(terminal), 0);
    char name[128] = "";
    EXPECT_EQ(ptsname_r(terminal, name, sizeof name), 0);
    device_ = name;
    modbus_t* modbus = modbus_new_rtu(name, 19200, 'E', 8, 1);
    modbus_set_slave(modbus, unit);
    modbus_set_socket(modbus, terminal);
    begin(modbus, [this, terminal] {
      serve();
      close(terminal);
    });
  }
  ~RtuMeterServer() {
    end();
    modbus_free(modbus_);
  }
  [[nodiscard]] const std::string& device() const { return device_; }

 private:
  std::string device_;
};

}  // namespace tramline::acquire
