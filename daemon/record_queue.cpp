#include "daemon/record_queue.hpp"

#include <iterator>
#include <type_traits>
#include <utility>
#include <variant>

namespace tramline {
namespace {

bool is_detail(const storage::Record& record) {
  return std::visit(
      [](const auto& r) {
        using R = std::decay_t<decltype(r)>;
        return std::is_same_v<R, storage::Aggregate> || std::is_same_v<R, storage::Frequency> ||
               std::is_same_v<R, storage::RegulatorInterval> || std::is_same_v<R, storage::Correction> ||
               std::is_same_v<R, storage::Waveform>;
      },
      record);
}

std::size_t waveform_bytes(const storage::Record& record) {
  std::size_t bytes = 0;
  if (const auto* waveform = std::get_if<storage::Waveform>(&record)) {
    for (const auto& trace : waveform->traces)
      bytes += trace.steps.size() * sizeof(std::int16_t);
  }
  return bytes;
}

}  // namespace

void RecordQueue::put(std::vector<storage::Record>& records) {
  if (records.empty()) return;
  bool wake = false;
  {
    const std::lock_guard lock(mutex_);
    for (storage::Record& record : records) {
      if (!is_detail(record)) {
        // The oldest is the one that has waited longest in vain; the newest may be the end of an event.
        if (events_.size() == limits_.events) {
          events_.pop_front();
          ++events_dropped_;
        }
        events_.push_back(std::move(record));
        wake = true;
        continue;
      }
      const std::size_t bytes = waveform_bytes(record);
      if (details_.size() == limits_.details || waveform_bytes_ + bytes > limits_.waveform_bytes) {
        ++details_dropped_;
        continue;
      }
      waveform_bytes_ += bytes;
      details_.push_back(std::move(record));
    }
  }
  records.clear();
  if (wake) filled_.notify_one();
}

RecordQueue::Batch RecordQueue::take(std::chrono::milliseconds patience) {
  std::unique_lock lock(mutex_);
  filled_.wait_for(lock, patience, [this] { return closed_ || !events_.empty(); });
  Batch batch;
  batch.records.reserve(events_.size() + details_.size());
  std::move(events_.begin(), events_.end(), std::back_inserter(batch.records));
  std::move(details_.begin(), details_.end(), std::back_inserter(batch.records));
  events_.clear();
  details_.clear();
  waveform_bytes_ = 0;
  batch.events_dropped = std::exchange(events_dropped_, 0);
  batch.details_dropped = std::exchange(details_dropped_, 0);
  batch.closed = closed_;
  return batch;
}

bool RecordQueue::crowded() {
  const std::lock_guard lock(mutex_);
  return 2 * events_.size() > limits_.events || 2 * details_.size() > limits_.details ||
         2 * waveform_bytes_ > limits_.waveform_bytes;
}

void RecordQueue::close() {
  {
    const std::lock_guard lock(mutex_);
    closed_ = true;
  }
  filled_.notify_one();
}

}  // namespace tramline
