#include "daemon/writer_thread.hpp"

#include <gtest/gtest.h>

#include <filesystem>

#include "storage/logbook_reader.hpp"

namespace tramline {
namespace {

TEST(WriterThread, WritesWhatIsInTheQueueBeforeItGoes) {
  const std::filesystem::path folder = std::filesystem::path(::testing::TempDir()) / "tramline-WriterThread";
  std::filesystem::remove_all(folder);
  std::filesystem::create_directories(folder);
  const std::string path = (folder / "site.logbook").string();
  RecordQueue queue({});
  {
    auto logbook = storage::LogbookWriter::open(path, {});
    ASSERT_TRUE(logbook) << logbook.error().text();
    WriterThread writer(std::move(logbook).value(), {}, queue,
                        [](bool trouble, const std::string& words) { EXPECT_FALSE(trouble) << words; });
    std::vector<storage::Record> records;
    records.emplace_back(storage::SessionBegin{"test", "source", 6400.0, true, UtcNs{0}});
    records.emplace_back(storage::CoverageBegin{{0}, {0}, "test began"});
    queue.put(records);
    for (int i = 0; i < 500; ++i) {
      storage::Event event;
      event.begin_sample = {i};
      storage::Aggregate aggregate;
      aggregate.begin = {i};
      records.emplace_back(event);
      records.emplace_back(aggregate);
      queue.put(records);
    }
  }
  auto reader = storage::LogbookReader::open(path);
  ASSERT_TRUE(reader);
  EXPECT_EQ(reader.value().events({}).value().size(), 500U);
  EXPECT_EQ(
      reader.value().aggregates(storage::Interval::ten_minutes, {UtcNs{-1}, std::nullopt}).value().size(),
      500U);
  std::filesystem::remove_all(folder);
}

}  // namespace
}  // namespace tramline
