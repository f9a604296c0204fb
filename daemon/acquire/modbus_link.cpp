#include "daemon/acquire/modbus_link.hpp"

// The kernel's terminal settings, which have the speed as a number, clash with the C library's.
#include <asm/termbits.h>
#include <modbus/modbus.h>
#include <poll.h>
#include <sys/ioctl.h>

#include <algorithm>
#include <cerrno>
#include <system_error>
#include <thread>

#include "daemon/acquire/tcp_connect.hpp"

namespace tramline::acquire {
namespace {

using Link = config::PolledMeterSettings::Link;
using Parity = config::PolledMeterSettings::Parity;

constexpr std::uint32_t kAnswerWithinUs = 500'000;
constexpr double kLineTimeS = 0.25;  // of an answer on a serial line; the rest is the meter's
constexpr double kBitsACharacter = 11.0;
constexpr int kMostWords = 120;  // the protocol's own limit is 125

std::string message(int error) {
  return std::error_code(error, std::generic_category()).message();
}

char letter(Parity parity) {
  switch (parity) {
    case Parity::even:
      return 'E';
    case Parity::odd:
      return 'O';
    case Parity::none:
      break;
  }
  return 'N';
}

Error cannot_open(const std::string& what, int error) {
  switch (error) {
    case ENOENT:
    case ENXIO:
    case ENODEV:
      return {what, "there is no such serial port",
              "plug the adapter in, or see under /dev/serial/by-id what it is called"};
    case EACCES:
    case EPERM:
      return {what, "this user may not open it", "add the user to the port's group, usually dialout"};
    case EBUSY:
      return {what, "another program has it", "stop the other program"};
    default:
      return {what, "cannot be opened: " + message(error), "see that it is a serial port"};
  }
}

}  // namespace

void ModbusLink::Closer::operator()(_modbus* modbus) const {
  modbus_close(modbus);
  modbus_free(modbus);
}

ModbusLink::ModbusLink(const config::PolledMeterSettings& settings)
    : what_(settings.link == Link::tcp ? settings.host + " port " + std::to_string(settings.port)
                                       : settings.device) {}

Result<ModbusLink> ModbusLink::open(const config::PolledMeterSettings& settings,
                                    const std::atomic<bool>& stop) {
  ModbusLink link(settings);
  if (auto done = link.connect(settings, stop); !done) return done.error();
  return link;
}

Status ModbusLink::connect(const config::PolledMeterSettings& settings, const std::atomic<bool>& stop) {
  const bool tcp = settings.link == Link::tcp;
  modbus_.reset(tcp ? modbus_new_tcp("127.0.0.1", 502)  // it is given a connected socket instead
                    : modbus_new_rtu(settings.device.c_str(), static_cast<int>(settings.baud),
                                     letter(settings.parity), 8, 1));
  if (!modbus_) return Error{what_, "cannot be prepared: " + message(errno), "see its settings"};
  // Unit 0 on a serial line is everybody, and nobody answers (Modbus over serial line 1.02, 2.2).
  if ((!tcp && settings.unit == 0) || modbus_set_slave(modbus_.get(), static_cast<int>(settings.unit)) != 0) {
    return Error{"source.unit", std::to_string(settings.unit) + " is no meter's address",
                 tcp ? "1 to 247, or 0 or 255 for the box itself" : "1 to 247"};
  }
  if (auto done = tcp ? connect_tcp(settings, stop) : connect_rtu(settings); !done) return done;
  what_ += ", unit " + std::to_string(settings.unit);
  // Without a time for each byte the whole answer has to come within this.
  modbus_set_response_timeout(modbus_.get(), 0, kAnswerWithinUs);
  modbus_set_byte_timeout(modbus_.get(), 0, 0);
  return kDone;
}

Status ModbusLink::connect_tcp(const config::PolledMeterSettings& settings, const std::atomic<bool>& stop) {
  // libmodbus would look for a name as long as it takes.
  const auto socket = tcp_connect(settings.host, static_cast<std::uint16_t>(settings.port), stop);
  if (!socket) return socket.error();
  modbus_set_socket(modbus_.get(), socket.value());
  return kDone;
}

Status ModbusLink::connect_rtu(const config::PolledMeterSettings& settings) {
  // One stop bit also without parity, where the standard asks for two: the commoner, and whoever waits for
  // two takes one as well. (common practice, no source)
  if (modbus_connect(modbus_.get()) != 0) return cannot_open(what_, errno);
  const int port = modbus_get_socket(modbus_.get());
  // Two programs on one line would each get half of the bytes.
  if (ioctl(port, TIOCEXCL) != 0)
    return Error{what_, "cannot be taken for this program alone", "see that it is a serial port"};
  // libmodbus takes 9600 without a word for a speed that it does not know.
  termios2 line{};
  if (ioctl(port, TCGETS2, &line) != 0 || line.c_ospeed != settings.baud) {
    return Error{what_, "does not do " + std::to_string(settings.baud) + " baud",
                 "give a usual speed in source.baud, such as 9600 or 19200"};
  }
  const double character_s = kBitsACharacter / static_cast<double>(settings.baud);
  // An answer is its values and five bytes: unit, function, length and checksum.
  most_words_ = std::clamp(static_cast<int>((kLineTimeS / character_s - 5.0) / 2.0), 2, kMostWords);
  // Three and a half characters of silence before a question (Modbus over serial line 1.02, 2.5.1.1).
  silence_ =
      std::chrono::microseconds(std::max<std::int64_t>(1750, static_cast<std::int64_t>(3.5e6 * character_s)));
  return kDone;
}

MeterAnswer ModbusLink::ask(const MeterRequest& request, std::uint16_t* words) {
  if (silence_.count() > 0) std::this_thread::sleep_for(silence_);
  modbus_flush(modbus_.get());
  const auto read = request.table == config::MeterRegister::Table::holding ? modbus_read_registers
                                                                           : modbus_read_input_registers;
  if (read(modbus_.get(), request.address, request.words, words) == request.words) return MeterAnswer::values;
  const int error = errno;
  constexpr int kExceptionBytes = 2;  // function and code
  switch (error) {
    case ETIMEDOUT:
      return MeterAnswer::late;
    case EMBBADCRC:
    case EMBBADDATA:
    case EMBBADEXC:
    case EMBUNKEXC:
    case EMBMDATA:
    case EMBBADSLAVE:
      // How many it sent is not known; so many it should have.
      refused_bytes_ += kExceptionBytes + std::int64_t{2} * request.words;
      return MeterAnswer::garbled;
    default:
      break;
  }
  if (error < MODBUS_ENOBASE) return MeterAnswer::gone;
  refused_bytes_ += kExceptionBytes;
  switch (error) {
    case EMBXILFUN:
      return MeterAnswer::refused_table;
    case EMBXILADD:
    case EMBXILVAL:
      return MeterAnswer::refused_address;
    case EMBXGPATH:
    case EMBXGTAR:
      return MeterAnswer::refused_unit;
    default:
      return MeterAnswer::refused;
  }
}

bool ModbusLink::wait(std::chrono::nanoseconds time) {
  pollfd line{modbus_get_socket(modbus_.get()), POLLIN | POLLRDHUP, 0};
  timespec at_most{};
  at_most.tv_sec = static_cast<time_t>(time.count() / kNsPerSecond);
  at_most.tv_nsec = static_cast<long>(time.count() % kNsPerSecond);
  const int came = ppoll(&line, 1, &at_most, nullptr);
  if (came < 0) return errno == EINTR;
  if (came == 0) return true;
  if ((line.revents & ~POLLIN) != 0) return false;
  refused_bytes_ += std::max(0, modbus_flush(modbus_.get()));
  return true;
}

}  // namespace tramline::acquire
