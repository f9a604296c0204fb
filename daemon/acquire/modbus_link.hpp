#pragma once

#include <atomic>
#include <chrono>
#include <cstdint>
#include <memory>
#include <string>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/meter_requests.hpp"

struct _modbus;

namespace tramline::acquire {

/// How a question to a meter ended.
enum class MeterAnswer {
  values,
  late,             ///< nothing came, or not all of it
  garbled,          ///< a bad checksum, or no answer to this question
  refused_table,    ///< exception 1: it does not know the function
  refused_address,  ///< exceptions 2 and 3: it has not all of the registers
  refused_unit,     ///< exceptions 10 and 11: a gateway knows no such meter
  refused,          ///< another exception: busy, out of order
  gone,             ///< the connection or the port is no more
};

/// A line to one meter, through libmodbus: Modbus TCP, or RTU over a serial line (Modbus application
/// protocol 1.1b3; Modbus over serial line 1.02). One thread. Closed with the object.
class ModbusLink {
 public:
  /// Connects. Looks at `stop` every 100 ms while it waits, and gives an Error then.
  [[nodiscard]] static Result<ModbusLink> open(const config::PolledMeterSettings& settings,
                                               const std::atomic<bool>& stop);

  /// Asks for `request` and puts its registers, as they came, into `words`. Takes half a second at most.
  [[nodiscard]] MeterAnswer ask(const MeterRequest& request, std::uint16_t* words);

  /// Waits so long, as nothing is to come now. What comes all the same is thrown away, and the wait ends
  /// early; false: the connection or the port is gone.
  [[nodiscard]] bool wait(std::chrono::nanoseconds time);

  /// Bytes thrown away, and those of answers that were no values.
  [[nodiscard]] std::int64_t refused_bytes() const { return refused_bytes_; }
  /// "192.168.7.20 port 502, unit 1"
  [[nodiscard]] const std::string& what() const { return what_; }
  /// Registers in one answer that the line carries within a fraction of the half second; 120 at most.
  [[nodiscard]] int most_words() const { return most_words_; }

 private:
  struct Closer {
    void operator()(_modbus* modbus) const;
  };
  explicit ModbusLink(const config::PolledMeterSettings& settings);
  Status connect(const config::PolledMeterSettings& settings, const std::atomic<bool>& stop);
  Status connect_rtu(const config::PolledMeterSettings& settings);
  Status connect_tcp(const config::PolledMeterSettings& settings, const std::atomic<bool>& stop);

  std::string what_;
  std::unique_ptr<_modbus, Closer> modbus_;
  std::chrono::microseconds silence_{0};  // before a question
  int most_words_ = 120;
  std::int64_t refused_bytes_ = 0;
};

}  // namespace tramline::acquire
