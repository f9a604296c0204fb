#include "daemon/record_queue.hpp"

#include <gtest/gtest.h>

#include <thread>
#include <variant>
#include <vector>

namespace tramline {
namespace {

using storage::Aggregate;
using storage::Event;
using storage::Record;
using storage::Waveform;

constexpr std::chrono::milliseconds kNoPatience(0);

std::vector<Record> events(int from, int count) {
  std::vector<Record> records;
  for (int i = 0; i < count; ++i) {
    Event event;
    event.begin_sample = {from + i};
    records.emplace_back(event);
  }
  return records;
}

TEST(RecordQueue, GivesEventsBeforeDetailsAndEachInTheirOrder) {
  RecordQueue queue({});
  std::vector<Record> records;
  records.emplace_back(Aggregate{});
  records.emplace_back(storage::CoverageBegin{});
  records.emplace_back(Event{});
  queue.put(records);
  EXPECT_TRUE(records.empty());
  const auto batch = queue.take(kNoPatience);
  ASSERT_EQ(batch.records.size(), 3U);
  EXPECT_TRUE(std::holds_alternative<storage::CoverageBegin>(batch.records[0]));
  EXPECT_TRUE(std::holds_alternative<Event>(batch.records[1]));
  EXPECT_TRUE(std::holds_alternative<Aggregate>(batch.records[2]));
  EXPECT_TRUE(queue.take(kNoPatience).records.empty());
}

TEST(RecordQueue, AFullQueueDropsDetailsFirstAndCountsThem) {
  RecordQueue queue({4, 2, 1000});
  std::vector<Record> records = events(0, 4);
  for (int i = 0; i < 5; ++i)
    records.emplace_back(Aggregate{});
  queue.put(records);
  const auto batch = queue.take(kNoPatience);
  EXPECT_EQ(batch.records.size(), 6U);
  EXPECT_EQ(batch.events_dropped, 0);
  EXPECT_EQ(batch.details_dropped, 3);
  EXPECT_EQ(queue.take(kNoPatience).details_dropped, 0);
}

TEST(RecordQueue, IsCrowdedWhenALaneIsMoreThanHalfFull) {
  RecordQueue queue({4, 2, 1000});
  std::vector<Record> records = events(0, 2);
  queue.put(records);
  EXPECT_FALSE(queue.crowded());
  records = events(2, 1);
  queue.put(records);
  EXPECT_TRUE(queue.crowded());
  (void)queue.take(kNoPatience);
  EXPECT_FALSE(queue.crowded());
}

TEST(RecordQueue, OfTooManyEventsTheNewestStay) {
  RecordQueue queue({4, 2, 1000});
  std::vector<Record> records = events(0, 10);
  queue.put(records);
  const auto batch = queue.take(kNoPatience);
  ASSERT_EQ(batch.records.size(), 4U);
  EXPECT_EQ(std::get<Event>(batch.records[0]).begin_sample.value, 6);
  EXPECT_EQ(batch.events_dropped, 6);
}

TEST(RecordQueue, WaveformsAreBoundedByTheirBytes) {
  RecordQueue queue({4, 100, 5000});
  std::vector<Record> records;
  for (int i = 0; i < 4; ++i) {
    Waveform waveform;
    waveform.traces.push_back({{}, 1.0F, std::vector<std::int16_t>(1000)});
    records.emplace_back(waveform);
  }
  queue.put(records);
  const auto batch = queue.take(kNoPatience);
  EXPECT_EQ(batch.records.size(), 2U);
  EXPECT_EQ(batch.details_dropped, 2);
}

TEST(RecordQueue, EverythingPutByOneThreadArrivesAtTheOtherInOrder) {
  RecordQueue queue({});
  constexpr int kCount = 20000;
  std::thread putting([&queue] {
    for (int i = 0; i < kCount; i += 10) {
      std::vector<Record> records = events(i, 10);
      queue.put(records);
      if (i % 1000 == 0) std::this_thread::yield();
    }
    queue.close();
  });
  std::int64_t next = 0;
  std::int64_t dropped = 0;
  for (bool closed = false; !closed;) {
    const auto batch = queue.take(std::chrono::milliseconds(1000));
    closed = batch.closed;
    dropped += batch.events_dropped;
    for (const Record& record : batch.records) {
      const std::int64_t sample = std::get<Event>(record).begin_sample.value;
      EXPECT_GE(sample, next);
      next = sample + 1;
    }
  }
  putting.join();
  EXPECT_EQ(next, kCount);
  EXPECT_GE(dropped, 0);
}

}  // namespace
}  // namespace tramline
