#pragma once

#include <atomic>
#include <cstdint>
#include <functional>
#include <mutex>
#include <string>
#include <thread>
#include <vector>

#include "config/site.hpp"
#include "daemon/record_queue.hpp"
#include "storage/logbook_writer.hpp"

namespace tramline {

/// Writes the records from the queue to the logbook, on a thread of its own, so that measuring never waits
/// for the disk.
///
/// Events are written as they come and are durable when the write returns; details are committed once a
/// minute. While writing fails (a full disk), records wait in bounded memory, the details being dropped first
/// and counted, and the write is tried again every few seconds. Once an hour old detail is pruned by the
/// site's limits.
class WriterThread {
 public:
  /// What the thread has to say, for the log; called on the thread.
  using Tell = std::function<void(bool trouble, const std::string& words)>;

  WriterThread(storage::LogbookWriter logbook, config::LogbookSettings settings, RecordQueue& queue,
               Tell tell);
  /// Closes the queue, writes what is in it, and joins.
  ~WriterThread();
  WriterThread(const WriterThread&) = delete;
  WriterThread& operator=(const WriterThread&) = delete;

  /// Whether the last write succeeded. Any thread.
  [[nodiscard]] bool writing() const { return writing_.load(); }

 private:
  void run();
  bool write(std::vector<storage::Record>& records);
  void flush();
  void prune();
  void keep_waiting(std::vector<storage::Record>& records);

  storage::LogbookWriter logbook_;
  config::LogbookSettings settings_;
  RecordQueue& queue_;
  Tell tell_;
  std::atomic<bool> writing_{true};
  std::vector<storage::Record> waiting_;  // could not be written yet
  std::int64_t dropped_ = 0;
  std::thread thread_;
};

}  // namespace tramline
