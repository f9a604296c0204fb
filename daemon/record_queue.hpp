#pragma once

#include <chrono>
#include <condition_variable>
#include <cstddef>
#include <cstdint>
#include <deque>
#include <mutex>
#include <vector>

#include "storage/records.hpp"

namespace tramline {

/// The one place where the measuring thread and the writer thread meet: a bounded queue of records.
///
/// Putting never waits. Events, coverage and clock records have a lane of their own, so when the disk does
/// not keep up the aggregates and waveforms go first; what is dropped is counted. Safe for one thread on each
/// side.
class RecordQueue {
 public:
  struct Limits {
    std::size_t events = 4096;               ///< records of the first lane
    std::size_t details = 16384;             ///< records of the second
    std::size_t waveform_bytes = 8U << 20U;  ///< of waveforms waiting
  };
  explicit RecordQueue(Limits limits) : limits_(limits) {}

  /// Takes the records out of `records`, which is left empty.
  void put(std::vector<storage::Record>& records);

  struct Batch {
    std::vector<storage::Record> records;  ///< events and coverage first, then the details
    std::int64_t events_dropped = 0;       ///< since the batch before
    std::int64_t details_dropped = 0;
    bool closed = false;  ///< no more will come
  };
  /// Waits until there are records of the first lane, or the queue is closed, or `patience` is over; then
  /// takes all.
  [[nodiscard]] Batch take(std::chrono::milliseconds patience);

  void close();

  /// Whether either lane is more than half full. A source that can wait, such as a recording, waits then.
  [[nodiscard]] bool crowded();

 private:
  Limits limits_;
  std::mutex mutex_;
  std::condition_variable filled_;
  std::deque<storage::Record> events_;
  std::deque<storage::Record> details_;
  std::size_t waveform_bytes_ = 0;
  std::int64_t events_dropped_ = 0;
  std::int64_t details_dropped_ = 0;
  bool closed_ = false;
};

}  // namespace tramline
