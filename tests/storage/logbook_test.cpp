#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sqlite3.h>
#include <unistd.h>

#include <array>
#include <filesystem>
#include <fstream>
#include <string>
#include <vector>

#include "storage/logbook_reader.hpp"
#include "storage/logbook_writer.hpp"
#include "storage/schema.hpp"

namespace tramline::storage {
namespace {

namespace fs = std::filesystem;
using ::testing::HasSubstr;
using ::testing::Not;

constexpr std::int64_t kSecond = kNsPerSecond;

class Logbook : public ::testing::Test {
 protected:
  Logbook() {
    const auto* test = ::testing::UnitTest::GetInstance()->current_test_info();
    folder_ = fs::path(::testing::TempDir()) /
              (std::string("tramline-") + test->test_suite_name() + "-" + test->name());
    fs::remove_all(folder_);
    fs::create_directories(folder_);
    path_ = (folder_ / "site.logbook").string();
  }
  ~Logbook() override { fs::remove_all(folder_); }

  LogbookWriter writer(OpenOptions options = {}) {
    auto opened = LogbookWriter::open(path_, options);
    if (!opened) throw std::runtime_error(opened.error().text());
    return std::move(opened).value();
  }
  LogbookReader reader() {
    auto opened = LogbookReader::open(path_);
    if (!opened) throw std::runtime_error(opened.error().text());
    return std::move(opened).value();
  }
  std::string refusal(OpenOptions options = {}) {
    auto opened = LogbookWriter::open(path_, options);
    return opened ? std::string("opened") : opened.error().text();
  }
  void sql(const std::string& text) {
    sqlite3* database = nullptr;
    sqlite3_open(path_.c_str(), &database);
    char* message = nullptr;
    if (sqlite3_exec(database, text.c_str(), nullptr, nullptr, &message) != SQLITE_OK)
      ADD_FAILURE() << message;
    sqlite3_close(database);
  }
  void bytes(const std::string& content) { std::ofstream(path_, std::ios::binary) << content; }

  fs::path folder_;
  std::string path_;
};

void write(LogbookWriter& writer, std::vector<Record> records) {
  const auto written = writer.write(records);
  ASSERT_TRUE(written) << written.error().text();
  EXPECT_TRUE(records.empty());
}

std::vector<Record> session() {
  return {SessionBegin{"test 1", "a source", 6400.0, true, UtcNs{0}}, CoverageBegin{{0}, {0}, "test began"}};
}

Event sag(std::int64_t begin_s, EventEnd end = EventEnd::recovered) {
  Event event;
  event.kind = EventKind::sag;
  event.begin_sample = {begin_s * 6400};
  event.begin = {begin_s * kSecond};
  event.begin_window_end = event.begin + 20'000'000;
  event.end_reason = end;
  event.end = event.begin + (end == EventEnd::open ? 0 : kSecond);
  event.end_window_end = event.end + 20'000'000;
  event.duration_ns = event.end - event.begin;
  event.phases = 0b101;
  event.worst_phase = Phase::l3;
  event.extreme_v = 131.25;
  event.reference_v = 220.0;
  event.threshold_v = 198.0;
  event.hysteresis_v = 4.4;
  event.origin = Origin::supply;
  event.reason = "the supply's doing; DROP TABLE event; --'";
  event.held_off = true;
  event.input_low_v = 131.25;
  event.clock = {ClockTrust::holdover, 1'500'000};
  return event;
}

Aggregate aggregate(Interval interval, std::int64_t begin_s, double volts) {
  Aggregate a;
  a.interval = interval;
  a.channel = {Side::output, Phase::l2};
  a.begin = {begin_s * kSecond};
  a.end = a.begin + (interval == Interval::three_seconds ? 3 : 600) * kSecond;
  a.u_rms_v = volts;
  a.blocks = 15;
  a.measured_ns = 3 * kSecond;
  a.flagged = true;
  return a;
}

TEST_F(Logbook, AnEventReadBackIsTheEventWritten) {
  auto to = writer();
  write(to, session());
  const Event written = sag(10);
  write(to, {written});
  const auto rows = reader().events({});
  ASSERT_TRUE(rows);
  ASSERT_EQ(rows.value().size(), 1U);
  const Event read = rows.value()[0].event;
  EXPECT_EQ(read.reason, written.reason);
  EXPECT_EQ(read.begin, written.begin);
  EXPECT_EQ(read.end_window_end, written.end_window_end);
  EXPECT_EQ(read.phases, written.phases);
  EXPECT_EQ(read.worst_phase, Phase::l3);
  EXPECT_EQ(read.origin, Origin::supply);
  EXPECT_EQ(read.held_off, true);
  EXPECT_EQ(read.clock, written.clock);
  EXPECT_DOUBLE_EQ(read.extreme_v, 131.25);
  EXPECT_TRUE(std::isnan(read.ratio_low));
}

TEST_F(Logbook, AnEventIsThereWhenItBeginsAndCompletedWhenItEnds) {
  auto to = writer();
  write(to, session());
  write(to, {sag(10, EventEnd::open)});
  EXPECT_EQ(reader().events({}).value()[0].event.end_reason, EventEnd::open);
  write(to, {sag(10)});
  const auto rows = reader().events({}).value();
  ASSERT_EQ(rows.size(), 1U);
  EXPECT_EQ(rows[0].event.end_reason, EventEnd::recovered);
}

TEST_F(Logbook, ExcursionsOfTwoPhasesThatBeginTogetherAreTwo) {
  auto to = writer();
  write(to, session());
  Event first = sag(10);
  first.kind = EventKind::out_of_band;
  first.worst_phase = Phase::l1;
  Event second = first;
  second.worst_phase = Phase::l2;
  write(to, {first, second});
  EXPECT_EQ(reader().events({}).value().size(), 2U);
}

TEST_F(Logbook, DetailWaitsForTheNextEventOrAFlush) {
  auto to = writer();
  write(to, session());
  write(to, {aggregate(Interval::three_seconds, 0, 219.5)});
  EXPECT_EQ(reader().aggregates(Interval::three_seconds, {}).value().size(), 0U);
  write(to, {sag(10)});
  EXPECT_EQ(reader().aggregates(Interval::three_seconds, {}).value().size(), 1U);
  write(to, {aggregate(Interval::three_seconds, 3, storage::kNotMeasured)});
  ASSERT_TRUE(to.flush());
  const auto rows = reader().aggregates(Interval::three_seconds, {}).value();
  ASSERT_EQ(rows.size(), 2U);
  EXPECT_DOUBLE_EQ(rows[0].u_rms_v, 219.5);
  EXPECT_EQ(rows[0].channel, (Channel{Side::output, Phase::l2}));
  EXPECT_TRUE(rows[0].flagged);
  EXPECT_TRUE(std::isnan(rows[1].u_rms_v));
}

TEST_F(Logbook, EveryOtherKindOfRecordComesBackAsWell) {
  auto to = writer();
  write(to, session());
  RegulatorInterval interval;
  interval.phase = Phase::l2;
  interval.end = {600 * kSecond};
  interval.output_half_cycles = 60000;
  interval.output_in_band = 59000;
  interval.ratio_mean = 1.17;
  interval.corrections = 3;
  interval.travel = 0.25;
  write(to, {interval, Correction{Phase::l1, {64}, {10}, {20}, 1.0, 1.17, 20.0},
             Frequency{{0}, {10 * kSecond}, 49.98, 499, false, true, {}},
             ClockChange{{7}, "the clock was set", -3, {ClockTrust::synchronised, 5}},
             Loss{{8}, "aggregates dropped", 4}, SettingsInForce{{0}, "site: {}"},
             CoverageProgress{{60 * kSecond}, 60 * kSecond}});
  Waveform waveform;
  waveform.begin = {100};
  waveform.end = {200};
  waveform.rate_hz = 6400.0;
  waveform.traces = {{{Side::input, Phase::l1}, 0.01F, {-32767, 0, 1, 32767}},
                     {{Side::output, Phase::l1}, 0.02F, {1, 2, 3, -4}}};
  write(to, {waveform, CoverageEnd{{90 * kSecond}, 90 * kSecond, "stopped"}, SessionEnd{"stopped"}});

  const auto from = reader();
  EXPECT_EQ(from.regulator_intervals({}).value()[0].output_in_band, 59000);
  EXPECT_EQ(from.regulator_intervals({}).value()[0].phase, Phase::l2);
  EXPECT_DOUBLE_EQ(from.corrections({}).value()[0].ratio_after, 1.17);
  EXPECT_EQ(from.frequencies({}).value()[0].cycles, 499);
  EXPECT_FALSE(from.frequencies({}).value()[0].trusted);
  EXPECT_EQ(from.clock_changes({}).value()[0].step_ns, -3);
  EXPECT_EQ(from.losses().value()[0].count, 4);
  EXPECT_EQ(from.settings(std::nullopt).value(), "site: {}");
  const auto stretches = from.coverage({}).value();
  ASSERT_EQ(stretches.size(), 1U);
  EXPECT_EQ(stretches[0].measured_ns, 90 * kSecond);
  EXPECT_EQ(stretches[0].why_ended, "stopped");
  EXPECT_EQ(from.sessions().value()[0].why_ended, "stopped");
  const auto found = from.waveforms(1, {UtcNs{150}, UtcNs{150}}).value();
  ASSERT_EQ(found.size(), 1U);
  const Waveform read = from.waveform(found[0].id).value();
  ASSERT_EQ(read.traces.size(), 2U);
  EXPECT_EQ(read.traces[0].steps, waveform.traces[0].steps);
  EXPECT_EQ(read.traces[1].steps, waveform.traces[1].steps);
  EXPECT_FLOAT_EQ(read.traces[0].volts_per_step, 0.01F);
}

TEST_F(Logbook, APeriodTakesWhatReachesIntoIt) {
  auto to = writer();
  write(to, session());
  write(to, {sag(10), sag(20), sag(30)});
  EXPECT_EQ(reader().events({UtcNs{20 * kSecond}, std::nullopt}).value().size(), 2U);
  EXPECT_EQ(reader().events({std::nullopt, UtcNs{20 * kSecond}}).value().size(), 1U);
  EXPECT_EQ(reader().events({UtcNs{20 * kSecond + 1}, UtcNs{21 * kSecond}}).value().size(), 1U);
}

TEST_F(Logbook, ACopyTakenWithoutNoticeHoldsTheBegunEventWhichTheNextStartClosesAsCutOff) {
  auto to = writer();
  write(to, session());
  write(to, {sag(100, EventEnd::open), CoverageProgress{{160 * kSecond}, 160 * kSecond}});
  // What a power cut would leave: the files as they are, without the writer closing them.
  const fs::path copy = folder_ / "copy";
  fs::create_directories(copy);
  for (const char* suffix : {"", "-wal"})
    fs::copy_file(path_ + suffix, copy / (std::string("site.logbook") + suffix));
  path_ = (copy / "site.logbook").string();
  auto next = writer();
  EXPECT_EQ(next.opening_remarks().size(), 2U);
  const auto rows = reader().events({}).value();
  ASSERT_EQ(rows.size(), 1U);
  EXPECT_EQ(rows[0].event.end_reason, EventEnd::cut_off);
  EXPECT_EQ(rows[0].event.end.value, 160 * kSecond);
  EXPECT_EQ(rows[0].event.duration_ns, 60 * kSecond);
  EXPECT_EQ(reader().coverage({}).value()[0].why_ended, "the logger stopped without notice");
}

TEST_F(Logbook, TheSameSettingsAreKeptOnce) {
  auto to = writer();
  write(to, session());
  write(to, {SettingsInForce{{1}, "a"}});
  write(to, {SettingsInForce{{2}, "a"}});
  write(to, {SettingsInForce{{3}, "b"}});
  EXPECT_EQ(reader().settings(UtcNs{2}).value(), "a");
  EXPECT_EQ(reader().settings(std::nullopt).value(), "b");
  EXPECT_EQ(reader().settings(UtcNs{0}).value(), "a");
}

TEST_F(Logbook, ACalibrationIsKeptWhenItChangesAndWhenItIsTakenAway) {
  auto to = writer();
  const auto session_at = [&](std::int64_t begin_s, const std::string& calibration) {
    write(to, {SessionBegin{"test 1", "a source", 6400.0, true, UtcNs{begin_s * kSecond}},
               CalibrationInForce{{begin_s * kSecond}, calibration}});
  };
  session_at(0, "");  // never calibrated: nothing to keep
  EXPECT_TRUE(reader().calibrations().value().empty());
  EXPECT_EQ(reader().calibration(std::nullopt).value(), "");
  session_at(10, "first");
  session_at(20, "first");
  session_at(30, "");
  session_at(40, "second");
  const auto rows = reader().calibrations().value();
  ASSERT_EQ(rows.size(), 3U);
  EXPECT_EQ(rows[0].session, 2);
  EXPECT_EQ(rows[0].calibration.from, UtcNs{10 * kSecond});
  EXPECT_EQ(rows[0].calibration.text, "first");
  EXPECT_EQ(rows[1].calibration.text, "");
  EXPECT_EQ(rows[2].calibration.text, "second");
  for (const auto& [at_s, text] : std::vector<std::pair<std::int64_t, std::string>>{
           {5, ""}, {10, "first"}, {25, "first"}, {35, ""}, {99, "second"}})
    EXPECT_EQ(reader().calibration(UtcNs{at_s * kSecond}).value(), text) << at_s;
  EXPECT_EQ(reader().calibration(std::nullopt).value(), "second");
}

TEST_F(Logbook, TheImportOfAnOldRecordingDoesNotUndoTheCalibrationOfTheDaemonsTime) {
  auto to = writer();
  write(to, {SessionBegin{"daemon", "live", 6400.0, true, UtcNs{100 * kSecond}},
             CalibrationInForce{{100 * kSecond}, "plant"}});
  write(to, {SessionBegin{"import", "old", 6400.0, true, UtcNs{50 * kSecond}},
             CalibrationInForce{{50 * kSecond}, ""}});
  EXPECT_EQ(reader().calibration(UtcNs{200 * kSecond}).value(), "plant");
  EXPECT_EQ(reader().calibration(UtcNs{60 * kSecond}).value(), "");
}

TEST_F(Logbook, ALogbookWithoutCalibrationsIsReadAsItIsAndBroughtForwardByItsWriter) {
  {
    auto opened = Database::open(path_, Database::Mode::read_write_create);
    ASSERT_TRUE(opened);
    ASSERT_TRUE(opened.value().execute("PRAGMA application_id=" + std::to_string(kApplicationId)));
    ASSERT_TRUE(migrate(opened.value(), migrations().first(2)));
    ASSERT_TRUE(
        opened.value().execute("INSERT INTO session VALUES(1,'old','a source',6400,1,0,'stopped',0)"));
  }
  EXPECT_EQ(reader().calibration(std::nullopt).value(), "");
  EXPECT_TRUE(reader().calibrations().value().empty());
  EXPECT_EQ(reader().sessions().value().size(), 1U);
  auto to = writer();
  write(to, session());
  write(to, {CalibrationInForce{{7}, "c"}});
  EXPECT_EQ(reader().calibration(std::nullopt).value(), "c");
  EXPECT_EQ(reader().sessions().value().size(), 2U);
}

// ---- files that are no logbook -------------------------------------------------------------------------

TEST_F(Logbook, AFileThatIsNotSqliteIsRefusedAndLeftAlone) {
  bytes("These are notes about the garden, and nothing else.\n");
  EXPECT_THAT(refusal(), HasSubstr("not an SQLite file"));
  EXPECT_EQ(fs::file_size(path_), 52U);
  EXPECT_THAT(LogbookReader::open(path_).error().text(), HasSubstr("not an SQLite file"));
}

TEST_F(Logbook, TheDaemonSetsAFileThatIsNotSqliteAsideAndRecordsIt) {
  bytes("These are notes about the garden, and nothing else.\n");
  OpenOptions options;
  options.set_aside_damaged = true;
  options.now = {77};
  auto to = writer(options);
  EXPECT_TRUE(fs::exists(path_ + ".damaged-77"));
  ASSERT_EQ(reader().losses().value().size(), 1U);
  EXPECT_THAT(reader().losses().value()[0].what, HasSubstr("set aside"));
}

TEST_F(Logbook, SomebodyElsesDatabaseIsRefusedEvenByTheDaemon) {
  sql("CREATE TABLE recipes(name TEXT)");
  OpenOptions options;
  options.set_aside_damaged = true;
  EXPECT_THAT(refusal(options), HasSubstr("no Tramline logbook"));
  EXPECT_THAT(LogbookReader::open(path_).error().text(), HasSubstr("no Tramline logbook"));
  sql("INSERT INTO recipes VALUES('still here')");
}

TEST_F(Logbook, ALogbookOfANewerSchemaIsRefusedWithBothVersions) {
  { auto to = writer(); }
  sql("PRAGMA user_version=7");
  EXPECT_THAT(refusal(), HasSubstr("schema 7; this program knows up to " + std::to_string(newest_schema())));
  EXPECT_THAT(LogbookReader::open(path_).error().text(), HasSubstr("newer version"));
}

TEST_F(Logbook, ADamagedLogbookIsSetAsideByTheDaemonAndRefusedOtherwise) {
  {
    auto to = writer();
    write(to, session());
    for (int i = 0; i < 400; ++i)
      write(to, {sag(i)});
  }
  {
    std::fstream file(path_, std::ios::in | std::ios::out | std::ios::binary);
    const std::string garbage(20000, '\x5a');
    file.seekp(8192);
    file.write(garbage.data(), static_cast<std::streamsize>(garbage.size()));
  }
  EXPECT_THAT(refusal(), HasSubstr("damaged"));
  OpenOptions options;
  options.set_aside_damaged = true;
  options.now = {88};
  auto to = writer(options);
  EXPECT_TRUE(fs::exists(path_ + ".damaged-88"));
  EXPECT_EQ(reader().events({}).value().size(), 0U);
  EXPECT_EQ(reader().losses().value().size(), 1U);
}

TEST_F(Logbook, PathsThatCannotBeWrittenAreRefusedWithARemedy) {
  path_ = folder_.string();
  EXPECT_THAT(refusal(), HasSubstr("this is a folder"));
  bytes("");
  path_ = (folder_ / "no" / "such" / "folder" / "site.logbook").string();
  EXPECT_THAT(refusal(), HasSubstr("check that the folder exists"));
  EXPECT_THAT(LogbookReader::open(path_).error().text(), HasSubstr("no such logbook"));
}

TEST_F(Logbook, AnEmptyFileBecomesALogbook) {
  bytes("");
  auto to = writer();
  write(to, session());
  EXPECT_EQ(reader().sessions().value().size(), 1U);
}

TEST_F(Logbook, AValueThatNoRecordCanHaveIsAnErrorAndNotACrash) {
  {
    auto to = writer();
    write(to, session());
    write(to, {sag(1)});
  }
  sql("UPDATE event SET kind=99");
  const auto rows = reader().events({});
  ASSERT_FALSE(rows);
  EXPECT_THAT(rows.error().text(), HasSubstr("table event"));
  sql("UPDATE event SET kind='sag', reason=x'00ff', extreme_v='high'");
  EXPECT_TRUE(reader().events({}));
}

// ---- what must not harm a logbook ----------------------------------------------------------------------

TEST_F(Logbook, ASecondWriterIsRefusedAndTheFirstOnesOpenEventStaysOpen) {
  auto to = writer();
  write(to, session());
  write(to, {sag(5, EventEnd::open)});
  EXPECT_THAT(refusal(), HasSubstr("another program is writing this logbook"));
  EXPECT_EQ(reader().events({}).value()[0].event.end_reason, EventEnd::open);
  EXPECT_FALSE(reader().sessions().value()[0].why_ended);
}

TEST_F(Logbook, AWriterThatWentLeavesRoomForTheNextAndNoLockBehind) {
  { auto to = writer(); }
  EXPECT_FALSE(fs::exists(path_ + ".writing"));
  std::ofstream(path_ + ".writing") << "left by a power cut";
  EXPECT_EQ(refusal(), "opened");
}

TEST_F(Logbook, AWholeLogbookThatCannotBeOpenedNowIsNotTakenForDamaged) {
  { auto to = writer(); }
  fs::create_directory(path_ + "-wal");  // stands in for a log of another owner, or a disk without room
  OpenOptions daemon;
  daemon.set_aside_damaged = true;
  EXPECT_THAT(refusal(daemon), HasSubstr("unable to open"));
  EXPECT_TRUE(fs::exists(path_));
  for (const auto& entry : fs::directory_iterator(folder_))
    EXPECT_THAT(entry.path().string(), Not(HasSubstr("damaged")));
}

TEST_F(Logbook, AFileLeftByAPowerCutInMidCreationBecomesALogbook) {
  sql("PRAGMA auto_vacuum=INCREMENTAL; PRAGMA journal_mode=WAL");
  ASSERT_GT(fs::file_size(path_), 0U);
  auto to = writer();
  write(to, session());
  EXPECT_EQ(reader().sessions().value().size(), 1U);
}

TEST_F(Logbook, ARecordThatNoRowCanHoldIsCountedAndHoldsUpNoOther) {
  auto to = writer();
  write(to, session());
  Correction correction;
  correction.begin = {7};
  correction.speed_v_per_s = kNotMeasured;
  write(to, {correction});
  write(to, {sag(5)});
  EXPECT_EQ(reader().events({}).value().size(), 1U);
  EXPECT_TRUE(reader().corrections({}).value().empty());
  const auto losses = reader().losses().value();
  ASSERT_EQ(losses.size(), 1U);
  EXPECT_EQ(losses[0].count, 1);
  EXPECT_EQ(losses[0].at.value, 7);
  EXPECT_THAT(losses[0].what, HasSubstr("correction.speed_v_per_s"));
}

TEST_F(Logbook, CuttingOffAnEventNeverShortensIt) {
  {
    auto to = writer();
    write(to, session());
    Event event = sag(5, EventEnd::open);
    event.end = {50 * kSecond};
    event.duration_ns = 45 * kSecond;
    write(to, {event, CoverageProgress{{10 * kSecond}, 10 * kSecond}});
  }
  auto next = writer();
  const Event cut = reader().events({}).value()[0].event;
  EXPECT_EQ(cut.end_reason, EventEnd::cut_off);
  EXPECT_EQ(cut.end.value, 50 * kSecond);
  EXPECT_EQ(cut.duration_ns, 45 * kSecond);
}

TEST_F(Logbook, TheDurationOfACutOffEventIsCountedInSamplesAndNotOnASteppedClock) {
  {
    auto to = writer();
    write(to, session());
    // The clock jumped ahead by an hour while the event went on: 160 s were measured in all.
    write(to, {sag(100, EventEnd::open), CoverageProgress{{3760 * kSecond}, 160 * kSecond}});
  }
  auto next = writer();
  EXPECT_EQ(reader().events({}).value()[0].event.duration_ns, 60 * kSecond);
}

TEST_F(Logbook, AnEventThatGoesOnReachesIntoEveryLaterPeriod) {
  auto to = writer();
  write(to, session());
  write(to, {sag(5, EventEnd::open), sag(6)});
  EXPECT_EQ(reader().events({UtcNs{3000 * kSecond}, {}}).value().size(), 1U);
}

TEST_F(Logbook, DetailOfAnUndatedSessionHasNoAge) {
  auto to = writer();
  write(to, {SessionBegin{"test 1", "a source", 1000.0, false, UtcNs{0}, kSecond},
             aggregate(Interval::three_seconds, 0, 1)});
  ASSERT_TRUE(to.prune({1'800'000'000 * kSecond}, {}));
  EXPECT_EQ(reader().aggregates(Interval::three_seconds, {}).value().size(), 1U);
}

TEST_F(Logbook, AViewInTheNameOfATableIsRefusedBeforeItIsAsked) {
  { auto to = writer(); }
  sql("DROP TABLE loss; CREATE VIEW loss(at_ns,what,count,id) AS SELECT 1,'',1,1");
  EXPECT_THAT(LogbookReader::open(path_).error().text(), HasSubstr("not those of a logbook"));
  EXPECT_THAT(refusal(), HasSubstr("not those of a logbook"));
}

TEST_F(Logbook, ATriggerIsRefused) {
  { auto to = writer(); }
  sql("CREATE TRIGGER t AFTER INSERT ON event BEGIN DELETE FROM event; END");
  EXPECT_THAT(LogbookReader::open(path_).error().text(), HasSubstr("not those of a logbook"));
}

/// Somebody who may read but not write, while this lives; needs to be root to become it.
class Stranger {
 public:
  Stranger() : became_(::seteuid(65534) == 0) {}
  ~Stranger() {
    if (became_) (void)!::seteuid(0);
  }

 private:
  bool became_;
};

TEST_F(Logbook, ALogbookClosedInGoodOrderIsReadWhereNothingMayBeWritten) {
  {
    auto to = writer();
    write(to, session());
    write(to, {sag(5)});
  }
  fs::permissions(folder_, fs::perms(0555));
  fs::permissions(path_, fs::perms(0444));
  {
    const Stranger stranger;
    auto opened = LogbookReader::open(path_);
    EXPECT_TRUE(opened) << (opened ? "" : opened.error().text());
    if (opened) {
      EXPECT_EQ(opened.value().events({}).value().size(), 1U);
    }
  }
  fs::permissions(folder_, fs::perms(0755));
}

TEST_F(Logbook, ALogbookWithUnmergedPagesIsNotReadStaleWhereNothingMayBeWritten) {
  const fs::path copy = folder_ / "copy";
  fs::create_directories(copy);
  {
    auto to = writer();
    write(to, session());
    write(to, {sag(5)});
    for (const char* suffix : {"", "-wal"})
      fs::copy_file(path_ + suffix, copy / (std::string("site.logbook") + suffix));
  }
  fs::permissions(copy, fs::perms(0555));
  {
    const Stranger stranger;
    const auto opened = LogbookReader::open((copy / "site.logbook").string());
    EXPECT_FALSE(opened);
    if (!opened) {
      EXPECT_THAT(opened.error().text(), HasSubstr("copy both files"));
    }
  }
  fs::permissions(copy, fs::perms(0755));
}

// ---- upkeep -------------------------------------------------------------------------------------------

TEST_F(Logbook, OldDetailGoesByItsAgeAndTheLogbookSaysSo) {
  auto to = writer();
  write(to, session());
  for (std::int64_t day = 0; day < 20; ++day) {
    write(to, {aggregate(Interval::three_seconds, day * 86400, 220.0),
               aggregate(Interval::ten_minutes, day * 86400, 220.0)});
  }
  config::LogbookSettings settings;
  settings.keep_three_seconds_days = 5.0;
  ASSERT_TRUE(to.prune({20 * 86400 * kSecond}, settings));
  EXPECT_EQ(reader().aggregates(Interval::three_seconds, {}).value().size(), 5U);
  EXPECT_EQ(reader().aggregates(Interval::ten_minutes, {}).value().size(), 20U);
  const auto pruned = reader().pruned().value();
  ASSERT_EQ(pruned.size(), 1U);
  EXPECT_EQ(pruned[0].rows, 15);
  EXPECT_EQ(pruned[0].until.value, 15 * 86400 * kSecond);
}

TEST_F(Logbook, TheSizeBudgetIsKeptByDroppingTheFinestDetailFirstAndNeverEvents) {
  OpenOptions options;
  options.in_large_batches = true;
  auto to = writer(options);
  write(to, session());
  for (std::int64_t i = 0; i < 20000; ++i)
    write(to, {aggregate(Interval::three_seconds, 3 * i, 220.0)});
  for (std::int64_t i = 0; i < 2000; ++i)
    write(to, {aggregate(Interval::ten_minutes, 600 * i, 220.0), sag(i)});
  ASSERT_TRUE(to.flush());
  config::LogbookSettings settings;
  settings.keep_three_seconds_days = 0.0;
  settings.size_budget_mb = 1.0;
  const auto pruned = to.prune({0}, settings);
  ASSERT_TRUE(pruned) << pruned.error().text();
  EXPECT_GT(pruned.value().rows, 0);
  const auto three_seconds = reader().aggregates(Interval::three_seconds, {}).value();
  EXPECT_LT(three_seconds.size(), 20000U);
  EXPECT_EQ(reader().aggregates(Interval::ten_minutes, {}).value().size(), 2000U);
  EXPECT_EQ(reader().events({}).value().size(), 2000U);
  ASSERT_FALSE(three_seconds.empty());
  EXPECT_EQ(three_seconds.back().begin.value, 3 * 19999 * kSecond);
}

TEST_F(Logbook, MigrationsRunInOrderAndOnlyThoseMissing) {
  auto opened = Database::open(path_, Database::Mode::read_write_create);
  ASSERT_TRUE(opened);
  Database& database = opened.value();
  const std::array<Migration, 1> first = {{{"CREATE TABLE a(x INTEGER)"}}};
  const std::array<Migration, 2> both = {
      {{"CREATE TABLE a(x INTEGER)"}, {"ALTER TABLE a ADD COLUMN y INTEGER"}}};
  ASSERT_TRUE(migrate(database, first));
  ASSERT_TRUE(database.execute("INSERT INTO a VALUES(5)"));
  ASSERT_TRUE(migrate(database, both));
  ASSERT_TRUE(migrate(database, both));
  EXPECT_EQ(database.integer_of("PRAGMA user_version").value(), 2);
  EXPECT_EQ(database.integer_of("SELECT count(*) FROM a WHERE x=5 AND y IS NULL").value(), 1);
  const std::array<Migration, 3> broken = {{both[0], both[1], {"CREATE TABLE b(z); nonsense"}}};
  EXPECT_FALSE(migrate(database, broken));
  EXPECT_EQ(database.integer_of("PRAGMA user_version").value(), 2);
  EXPECT_EQ(database.integer_of("SELECT count(*) FROM sqlite_schema WHERE name='b'").value(), 0);
}

}  // namespace
}  // namespace tramline::storage
