#pragma once

#include <coroutine>
#include <utility>

#include <spdlog/logger.h>
#include <boost/asio/io_context.hpp>
#include <boost/asio/signal_set.hpp>
#include <boost/asio/steady_timer.hpp>
#include <chrono>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/source.hpp"
#include "daemon/clock_watch.hpp"
#include "daemon/pipeline.hpp"
#include "daemon/record_queue.hpp"
#include "daemon/writer_thread.hpp"

namespace tramline {

/// What the daemon leaves behind for the shell and the service manager.
enum class ServiceExit : int {
  stopped = 0,      ///< in good order
  wrong_input = 2,  ///< the site file is wrong; nothing was started
  could_not = 3,    ///< the logbook cannot be had
};

/// The daemon at work: one event loop that reads the source and measures, one writer thread behind the queue.
///
/// TERM and INT stop in good order: what is open is closed, partial intervals are stored as such. HUP reads
/// the site file again; a bad one is refused with its faults in the log, and the old one stays in force. A
/// source that fails ends coverage with the reason and is opened again, after a second at first and then less
/// and less often, at least once a minute.
class Service {
 public:
  Service(std::string site_file, std::shared_ptr<spdlog::logger> log);

  /// Runs until told to stop, or until the source is over.
  ServiceExit run();

 private:
  using Clock = std::chrono::steady_clock;

  void open_source();
  void begin_measuring();
  void close_source(storage::EventEnd reason, const std::string& why);
  void step();
  [[nodiscard]] bool take_block();
  void report_health();
  void source_failed(const Error& error);
  void reread();
  void look_at_clock();
  void remind_of_calibration();
  void await_signal();
  void stop(const std::string& why);
  void schedule(Clock::duration after);
  [[nodiscard]] std::size_t frames_due() const;

  std::string site_file_;
  std::shared_ptr<spdlog::logger> log_;
  boost::asio::io_context loop_;
  boost::asio::signal_set signals_;
  boost::asio::steady_timer timer_;

  std::unique_ptr<config::Site> site_;  // stays where it is while a pipeline refers to it
  std::unique_ptr<acquire::Source> source_;
  std::unique_ptr<Pipeline> pipeline_;
  RecordQueue queue_{RecordQueue::Limits{}};
  std::optional<WriterThread> writer_;

  measure::Block block_;
  std::vector<storage::Record> records_;
  bool real_time_ = true;
  Clock::time_point source_began_;
  std::int64_t frames_taken_ = 0;
  Clock::duration retry_after_;
  Clock::time_point next_look_;
  Clock::time_point next_reminder_{};
  std::optional<ClockWatch> clock_watch_;
  std::optional<storage::ClockTrust> clock_trust_;  // as last recorded in this session
  Clock::time_point next_report_;
  bool stopping_ = false;
};

}  // namespace tramline
