#include "daemon/writer_thread.hpp"

#include <algorithm>
#include <chrono>
#include <iterator>
#include <utility>

namespace tramline {
namespace {

using std::chrono::steady_clock;

constexpr std::chrono::milliseconds kPatience(500);
constexpr std::chrono::seconds kRetryAfter(5);
constexpr std::chrono::seconds kFlushEvery(45);
constexpr std::chrono::hours kPruneEvery(1);
constexpr std::size_t kMostWaiting = 20000;

UtcNs now() {
  return {std::chrono::duration_cast<std::chrono::nanoseconds>(
              std::chrono::system_clock::now().time_since_epoch())
              .count()};
}

}  // namespace

WriterThread::WriterThread(storage::LogbookWriter logbook, config::LogbookSettings settings,
                           RecordQueue& queue, Tell tell)
    : logbook_(std::move(logbook)), settings_(std::move(settings)), queue_(queue), tell_(std::move(tell)) {
  thread_ = std::thread([this] { run(); });
}

WriterThread::~WriterThread() {
  queue_.close();
  thread_.join();
}

void WriterThread::run() {
  steady_clock::time_point next_try = steady_clock::now();
  steady_clock::time_point next_flush = steady_clock::now() + kFlushEvery;
  steady_clock::time_point next_prune = steady_clock::now() + kPruneEvery;
  for (bool closed = false; !closed;) {
    RecordQueue::Batch batch = queue_.take(kPatience);
    closed = batch.closed;
    if (batch.events_dropped > 0) {
      batch.records.emplace_back(
          storage::Loss{now(), "events dropped: the queue to the logbook was full", batch.events_dropped});
    }
    if (batch.details_dropped > 0) {
      batch.records.emplace_back(
          storage::Loss{now(), "aggregates or waveforms dropped: the queue to the logbook was full",
                        batch.details_dropped});
    }
    std::move(batch.records.begin(), batch.records.end(), std::back_inserter(waiting_));

    const steady_clock::time_point at = steady_clock::now();
    if (!waiting_.empty() && (writing_ || at >= next_try || closed)) {
      if (!write(waiting_)) {
        next_try = at + kRetryAfter;
        keep_waiting(waiting_);
      }
    }
    if (at >= next_flush && writing_) {
      flush();
      next_flush = at + kFlushEvery;
    }
    if (at >= next_prune && writing_) {
      prune();
      next_prune = at + kPruneEvery;
    }
  }
  flush();
}

bool WriterThread::write(std::vector<storage::Record>& records) {
  if (dropped_ > 0)
    records.emplace_back(storage::Loss{now(), "records dropped: the logbook could not be written", dropped_});
  const bool adds_loss = dropped_ > 0;
  const auto written = logbook_.write(records);
  if (!written) {
    if (adds_loss) records.pop_back();
    if (writing_.exchange(false))
      tell_(true, written.error().text() + "; measuring goes on, records wait in memory");
    return false;
  }
  if (!writing_.exchange(true)) tell_(false, "the logbook is written again");
  dropped_ = 0;
  return true;
}

void WriterThread::keep_waiting(std::vector<storage::Record>& records) {
  if (records.size() <= kMostWaiting) return;
  // Details go first, then the oldest events.
  const auto is_event = [](const storage::Record& r) {
    return std::holds_alternative<storage::Event>(r) || std::holds_alternative<storage::CoverageBegin>(r) ||
           std::holds_alternative<storage::CoverageEnd>(r) ||
           std::holds_alternative<storage::SessionBegin>(r) ||
           std::holds_alternative<storage::SessionEnd>(r) || std::holds_alternative<storage::Loss>(r);
  };
  const std::size_t before = records.size();
  std::erase_if(records, [&](const storage::Record& r) { return !is_event(r); });
  if (records.size() > kMostWaiting) {
    records.erase(records.begin(),
                  records.begin() + static_cast<std::ptrdiff_t>(records.size() - kMostWaiting));
  }
  dropped_ += static_cast<std::int64_t>(before - records.size());
}

void WriterThread::flush() {
  if (auto flushed = logbook_.flush(); !flushed) {
    if (writing_.exchange(false)) tell_(true, flushed.error().text() + "; measuring goes on");
  }
}

void WriterThread::prune() {
  const auto pruned = logbook_.prune(now(), settings_);
  if (!pruned) tell_(true, pruned.error().text());
}

}  // namespace tramline
