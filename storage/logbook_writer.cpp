#include "storage/logbook_writer.hpp"

#include <algorithm>
#include <array>
#include <bit>
#include <cmath>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <optional>
#include <utility>

#include "storage/schema.hpp"
#include "storage/sqlite.hpp"
#include "storage/writer_lock.hpp"

namespace tramline::storage {
namespace {

namespace fs = std::filesystem;

constexpr std::size_t kMostWaiting = 5000;
constexpr const char* kCutOff = "the logger stopped without notice";

bool is_detail(const Record& record) {
  return std::holds_alternative<Aggregate>(record) || std::holds_alternative<Frequency>(record) ||
         std::holds_alternative<RegulatorInterval>(record) || std::holds_alternative<Correction>(record) ||
         std::holds_alternative<Waveform>(record) || std::holds_alternative<CoverageProgress>(record);
}

std::int64_t number_of(Side side) {
  return static_cast<std::int64_t>(side);
}
std::int64_t number_of(Phase phase) {
  return static_cast<std::int64_t>(phase);
}

void bind(Statement& statement, int at, const ClockState& clock) {
  statement.bind(at, static_cast<std::int64_t>(clock.trust));
  if (clock.error_bound_ns >= 0) {
    statement.bind(at + 1, clock.error_bound_ns);
  } else {
    statement.bind_null(at + 1);
  }
}

std::vector<std::uint8_t> little_endian(const std::vector<std::int16_t>& steps) {
  std::vector<std::uint8_t> bytes;
  bytes.reserve(2 * steps.size());
  for (const std::int16_t step : steps) {
    const auto bits = static_cast<std::uint16_t>(step);
    bytes.push_back(static_cast<std::uint8_t>(bits & 0xffU));
    bytes.push_back(static_cast<std::uint8_t>(bits >> 8U));
  }
  return bytes;
}

/// What stands at `path` before SQLite is asked.
enum class Found { nothing, sqlite, something_else };

Result<Found> look_at(const std::string& path) {
  std::error_code code;
  const fs::file_status status = fs::status(path, code);
  if (status.type() == fs::file_type::not_found) return Found::nothing;
  if (fs::is_directory(status)) return Error{path, "this is a folder", "name a file for the logbook"};
  std::ifstream file(path, std::ios::binary);
  if (!file) return Error{path, "the logbook cannot be read", "check who owns it and its permissions"};
  std::array<char, 16> head{};
  file.read(head.data(), head.size());
  if (file.gcount() == 0) return Found::nothing;
  const bool sqlite = file.gcount() == 16 && std::memcmp(head.data(), "SQLite format 3\0", 16) == 0;
  return sqlite ? Found::sqlite : Found::something_else;
}

Result<std::string> set_aside(const std::string& path, UtcNs now) {
  const std::string to = path + ".damaged-" + std::to_string(now.value);
  std::error_code code;
  fs::rename(path, to, code);
  if (code)
    return Error{path, "the damaged logbook cannot be set aside: " + code.message(), "move it away by hand"};
  for (const char* suffix : {"-wal", "-shm"}) {
    std::error_code ignored;  // they need not be there
    fs::rename(path + suffix, to + suffix, ignored);
  }
  return to;
}

/// Nothing if the file is whole, else its damage in words. That it could not be looked at (locked, no room,
/// no rights) is an Error and says nothing against the file.
Result<std::optional<std::string>> damage_of(const Database& database) {
  using Damage = std::optional<std::string>;
  auto check = database.prepare("PRAGMA quick_check(1)");
  if (!check) return database.failed_of_damage() ? Result(Damage(check.error().what)) : check.error();
  const auto row = check.value().step();
  if (!row) return database.failed_of_damage() ? Result(Damage(row.error().what)) : row.error();
  if (row.value() && check.value().text(0) == "ok") return Damage();
  return Damage(check.value().text(0));
}

/// When a record was, for a loss that stands in its place.
UtcNs time_of(const Record& record) {
  return std::visit(
      [](const auto& r) {
        if constexpr (requires { r.begin; }) {
          return r.begin;
        } else if constexpr (requires { r.at; }) {
          return r.at;
        } else if constexpr (requires { r.from; }) {
          return r.from;
        } else if constexpr (requires { r.until; }) {
          return r.until;
        } else if constexpr (requires { r.end; }) {
          return r.end;
        } else {
          return UtcNs{};
        }
      },
      record);
}

/// A power cut while the logbook was being made leaves an SQLite file with nothing in it.
bool is_empty(const Database& database) {
  const auto application = database.integer_of("PRAGMA application_id");
  const auto version = database.integer_of("PRAGMA user_version");
  const auto objects = database.integer_of("SELECT count(*) FROM sqlite_schema");
  return application && version && objects && application.value() == 0 && version.value() == 0 &&
         objects.value() == 0;
}

}  // namespace

struct LogbookWriter::Inside {
  /// What the records to come belong to; only ever replaced after a commit.
  struct Place {
    std::int64_t session = 0;
    std::int64_t coverage = 0;
  };

  WriterLock lock;  // outlives the connection
  Database database;
  bool in_large_batches = false;
  std::vector<std::string> remarks;
  Place place;
  std::vector<Record> waiting;

  Statement insert_session, end_session, insert_coverage, extend_coverage, end_coverage, put_event,
      put_aggregate, put_frequency, put_regulator_interval, put_correction, insert_waveform, insert_trace,
      insert_clock_change, last_settings, insert_settings, last_calibration, insert_calibration, insert_loss;

  Inside(WriterLock taken, Database opened) : lock(std::move(taken)), database(std::move(opened)) {}

  Status prepare();
  Status set_up();
  Status close_what_was_left_open();
  Status store_all(std::vector<Record>& records);
  Status store_any(const Record& record, Place& at);
  Status store(const Event& event, const Place& at);
  Status store(const Aggregate& aggregate, const Place& at);
  Status store(const Frequency& frequency, const Place& at);
  Status store(const RegulatorInterval& interval, const Place& at);
  Status store(const Correction& correction, const Place& at);
  Status store(const Waveform& waveform, const Place& at);
  Status store(const ClockChange& change, const Place& at);
  Status store_text(UtcNs from, const std::string& text, Statement& last, Statement& insert, const Place& at);
  Status store(const Loss& loss);
  Result<std::int64_t> drop(const char* table, const std::string& condition, UtcNs before);
  Result<double> used_bytes() const;
};

Status LogbookWriter::Inside::set_up() {
  // auto_vacuum must come before the first table; WAL is kept by the file.
  // An import can be done again, so it is synced once, by the checkpoint when it closes.
  const char* synchronous = in_large_batches ? "PRAGMA synchronous=NORMAL" : "PRAGMA synchronous=FULL";
  for (const char* sql : {"PRAGMA auto_vacuum=INCREMENTAL", "PRAGMA journal_mode=WAL", synchronous,
                          "PRAGMA foreign_keys=ON", "PRAGMA journal_size_limit=4194304"}) {
    if (auto done = database.execute(sql); !done) return done;
  }
  const auto tables = database.integer_of("SELECT count(*) FROM sqlite_schema");
  if (!tables) return tables.error();
  if (tables.value() == 0) {
    if (auto done = database.execute("PRAGMA application_id=" + std::to_string(kApplicationId)); !done)
      return done;
  }
  if (auto known = check_identity(database); !known) return known;
  if (auto done = migrate(database, migrations()); !done) return done;
  return check_tables(database);
}

Status LogbookWriter::Inside::prepare() {
  const std::pair<Statement*, const char*> all[] = {
      {&insert_session,
       "INSERT INTO session(program,source,rate_hz,dated,begin_ns,readings_every_ns) VALUES(?,?,?,?,?,?)"},
      {&end_session, "UPDATE session SET why_ended=?2 WHERE id=?1"},
      {&insert_coverage,
       "INSERT INTO coverage(session,begin_sample,begin_ns,until_ns,measured_ns,why_begun) "
       "VALUES(?1,?2,?3,?3,0,?4)"},
      {&extend_coverage, "UPDATE coverage SET until_ns=?2,measured_ns=?3 WHERE id=?1"},
      {&end_coverage, "UPDATE coverage SET until_ns=?2,measured_ns=?3,why_ended=?4 WHERE id=?1"},
      {&put_event,
       "INSERT INTO "
       "event(session,side,kind,begin_sample,phase_key,begin_ns,begin_window_end_ns,end_reason,end_ns,end_"
       "window_end_ns,"
       "duration_ns,phases,worst_phase,extreme_v,extreme_is_bound,reference_v,threshold_v,hysteresis_v,"
       "origin,reason,held_off,"
       "input_low_v,input_high_v,ratio_low,ratio_high,clock_trust,clock_error_bound_ns) "
       "VALUES(?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?) "
       "ON CONFLICT(session,side,kind,begin_sample,phase_key) DO UPDATE SET "
       "end_reason=excluded.end_reason,end_ns=excluded.end_ns,"
       "end_window_end_ns=excluded.end_window_end_ns,duration_ns=excluded.duration_ns,phases=excluded.phases,"
       "worst_phase=excluded.worst_phase,extreme_v=excluded.extreme_v,extreme_is_bound=excluded.extreme_is_"
       "bound,"
       "origin=excluded.origin,reason=excluded.reason,held_off=excluded.held_off,input_low_v=excluded.input_"
       "low_v,"
       "input_high_v=excluded.input_high_v,ratio_low=excluded.ratio_low,ratio_high=excluded.ratio_high"},
      {&put_aggregate, "INSERT OR REPLACE INTO aggregate VALUES(?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?)"},
      {&put_frequency, "INSERT OR REPLACE INTO frequency VALUES(?,?,?,?,?,?,?,?,?)"},
      {&put_regulator_interval,
       "INSERT OR REPLACE INTO regulator_interval VALUES(?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?,?)"},
      {&put_correction, "INSERT OR REPLACE INTO correction VALUES(?,?,?,?,?,?,?,?)"},
      {&insert_waveform,
       "INSERT INTO waveform(session,begin_sample,begin_ns,end_ns,rate_hz) VALUES(?,?,?,?,?)"},
      {&insert_trace, "INSERT INTO trace VALUES(?,?,?,?,?)"},
      {&insert_clock_change,
       "INSERT INTO clock_change(session,at_ns,what,step_ns,clock_trust,clock_error_bound_ns) "
       "VALUES(?,?,?,?,?,?)"},
      {&last_settings, "SELECT text FROM settings ORDER BY id DESC LIMIT 1"},
      {&insert_settings, "INSERT INTO settings(session,from_ns,text) VALUES(?,?,?)"},
      {&last_calibration, "SELECT text FROM calibration ORDER BY id DESC LIMIT 1"},
      {&insert_calibration, "INSERT INTO calibration(session,from_ns,text) VALUES(?,?,?)"},
      {&insert_loss, "INSERT INTO loss(at_ns,what,count) VALUES(?,?,?)"},
  };
  for (const auto& [into, sql] : all) {
    auto statement = database.prepare(sql);
    if (!statement) return statement.error();
    *into = std::move(statement).value();
  }
  return kDone;
}

Status LogbookWriter::Inside::close_what_was_left_open() {
  const auto events = database.integer_of("SELECT count(*) FROM event WHERE end_reason=0");
  const auto stretches = database.integer_of("SELECT count(*) FROM coverage WHERE why_ended IS NULL");
  if (!events) return events.error();
  if (!stretches) return stretches.error();
  auto transaction = Transaction::begin(database);
  if (!transaction) return transaction.error();
  // The last time known of a session is how far its coverage reached.
  const std::string known =
      "max(end_ns, coalesce((SELECT max(until_ns) FROM coverage WHERE coverage.session=event.session), "
      "end_ns))";
  // Counted in samples: what its stretch measured, less what lies before the event.
  const std::string duration =
      "max(duration_ns, coalesce((SELECT coverage.measured_ns - CAST((event.begin_sample - "
      "coverage.begin_sample) * 1e9 / session.rate_hz AS INTEGER) FROM coverage JOIN session ON "
      "session.id=coverage.session WHERE coverage.session=event.session AND "
      "coverage.begin_sample<=event.begin_sample ORDER BY coverage.begin_sample DESC LIMIT 1), duration_ns))";
  auto close = database.prepare("UPDATE event SET end_reason=?1,end_ns=" + known +
                                ",end_window_end_ns=max(end_window_end_ns, " + known +
                                "),duration_ns=" + duration + " WHERE end_reason=0");
  if (!close) return close.error();
  close.value().bind(1, static_cast<std::int64_t>(EventEnd::cut_off));
  if (auto done = close.value().run(); !done) return done;
  for (const char* table : {"coverage", "session"}) {
    auto end = database.prepare(std::string("UPDATE ") + table + " SET why_ended=?1 WHERE why_ended IS NULL");
    if (!end) return end.error();
    end.value().bind(1, std::string_view(kCutOff));
    if (auto done = end.value().run(); !done) return done;
  }
  if (auto done = transaction.value().commit(); !done) return done;
  if (events.value() > 0)
    remarks.push_back(std::to_string(events.value()) +
                      " events left open by an earlier run are closed as cut off");
  if (stretches.value() > 0)
    remarks.emplace_back(
        "an earlier run stopped without notice; its coverage is ended where it was last known");
  return kDone;
}

LogbookWriter::LogbookWriter(std::unique_ptr<Inside> inside) : inside_(std::move(inside)) {}
LogbookWriter::LogbookWriter(LogbookWriter&&) noexcept = default;
LogbookWriter& LogbookWriter::operator=(LogbookWriter&&) noexcept = default;
LogbookWriter::~LogbookWriter() {
  if (inside_) (void)flush();
}

const std::vector<std::string>& LogbookWriter::opening_remarks() const {
  return inside_->remarks;
}

Result<LogbookWriter> LogbookWriter::open(const std::string& path, const OpenOptions& options) {
  std::optional<Loss> damage;
  const auto make_room = [&](const Error& why) -> Status {
    if (!options.set_aside_damaged) return why;
    const auto to = set_aside(path, options.now);
    if (!to) return to.error();
    damage = Loss{
        options.now,
        "the logbook before this one was damaged and is set aside as " + to.value() + " (" + why.what + ")",
        1};
    return kDone;
  };

  const auto found = look_at(path);
  if (!found) return found.error();
  auto lock = WriterLock::take(path);
  if (!lock) return lock.error();
  if (found.value() == Found::something_else) {
    const Error no_logbook{path, "this is no logbook: not an SQLite file",
                           "name another file; this one was not touched"};
    if (auto done = make_room(no_logbook); !done) return done.error();
  }
  auto database = Database::open(path, Database::Mode::read_write_create);
  if (!database) return database.error();
  if (found.value() == Found::sqlite && !is_empty(database.value())) {
    // A stranger's file is refused before anything in it is looked at closely, and is never renamed.
    const auto application = database.value().integer_of("PRAGMA application_id");
    if (application && application.value() != kApplicationId) return check_identity(database.value()).error();
    const auto damaged = damage_of(database.value());
    if (!damaged) return damaged.error();
    if (damaged.value()) {
      database = Error{};  // closes it, so that it can be renamed
      const Error why{path, "the logbook is damaged: " + *damaged.value(),
                      "keep a copy, and name a new file"};
      if (auto done = make_room(why); !done) return done.error();
      database = Database::open(path, Database::Mode::read_write_create);
      if (!database) return database.error();
    }
  }

  auto inside = std::make_unique<Inside>(std::move(lock).value(), std::move(database).value());
  inside->in_large_batches = options.in_large_batches;
  if (auto done = inside->set_up(); !done) return done.error();
  if (auto done = inside->prepare(); !done) return done.error();
  if (auto done = inside->close_what_was_left_open(); !done) return done.error();
  if (damage) {
    inside->remarks.push_back(damage->what);
    if (auto done = inside->store(*damage); !done) return done.error();
  }
  return LogbookWriter(std::move(inside));
}

Status LogbookWriter::write(std::vector<Record>& records) {
  const bool urgent =
      !inside_->in_large_batches &&
      std::any_of(records.begin(), records.end(), [](const Record& record) { return !is_detail(record); });
  if (urgent || inside_->waiting.size() + records.size() > kMostWaiting) return inside_->store_all(records);
  std::move(records.begin(), records.end(), std::back_inserter(inside_->waiting));
  records.clear();
  return kDone;
}

Status LogbookWriter::flush() {
  if (inside_->waiting.empty()) return kDone;
  std::vector<Record> nothing;
  return inside_->store_all(nothing);
}

Status LogbookWriter::Inside::store_all(std::vector<Record>& records) {
  auto transaction = Transaction::begin(database);
  if (!transaction) return transaction.error();
  Place at = place;
  // A record that no row can hold is left out and counted; it must not hold up those behind it.
  Loss left_out;
  for (std::vector<Record>* part : {&waiting, &records}) {
    for (const Record& record : *part) {
      const auto stored = store_any(record, at);
      if (stored) continue;
      if (!database.failed_of_row()) return stored;
      if (left_out.count++ == 0) {
        left_out.at = time_of(record);
        left_out.what = "records left out: the logbook cannot hold them (" + stored.error().what + ")";
      }
    }
  }
  if (left_out.count > 0) {
    if (auto done = store(left_out); !done) return done;
  }
  if (auto done = transaction.value().commit(); !done) return done;
  place = at;
  waiting.clear();
  records.clear();
  return kDone;
}

Status LogbookWriter::Inside::store_any(const Record& record, Place& at) {
  if (const auto* begin = std::get_if<SessionBegin>(&record)) {
    insert_session.bind(1, std::string_view(begin->program))
        .bind(2, std::string_view(begin->source))
        .bind(3, begin->rate_hz);
    insert_session.bind(4, std::int64_t{begin->dated})
        .bind(5, begin->begin.value)
        .bind(6, begin->readings_every_ns);
    if (auto done = insert_session.run(); !done) return done;
    at.session = database.last_row_id();
    at.coverage = 0;
    return kDone;
  }
  if (at.session == 0 && !std::holds_alternative<Loss>(record)) {
    return Error{database.path(), "a record came before its session began",
                 "this is a fault of the program; please report it"};
  }
  if (const auto* end = std::get_if<SessionEnd>(&record)) {
    return end_session.bind(1, at.session).bind(2, std::string_view(end->why)).run();
  }
  if (const auto* begin = std::get_if<CoverageBegin>(&record)) {
    insert_coverage.bind(1, at.session)
        .bind(2, begin->begin_sample.value)
        .bind(3, begin->begin.value)
        .bind(4, std::string_view(begin->why));
    if (auto done = insert_coverage.run(); !done) return done;
    at.coverage = database.last_row_id();
    return kDone;
  }
  if (const auto* progress = std::get_if<CoverageProgress>(&record)) {
    return extend_coverage.bind(1, at.coverage)
        .bind(2, progress->until.value)
        .bind(3, progress->measured_ns)
        .run();
  }
  if (const auto* end = std::get_if<CoverageEnd>(&record)) {
    end_coverage.bind(1, at.coverage)
        .bind(2, end->end.value)
        .bind(3, end->measured_ns)
        .bind(4, std::string_view(end->why));
    return end_coverage.run();
  }
  if (const auto* event = std::get_if<Event>(&record)) return store(*event, at);
  if (const auto* aggregate = std::get_if<Aggregate>(&record)) return store(*aggregate, at);
  if (const auto* frequency = std::get_if<Frequency>(&record)) return store(*frequency, at);
  if (const auto* interval = std::get_if<RegulatorInterval>(&record)) return store(*interval, at);
  if (const auto* correction = std::get_if<Correction>(&record)) return store(*correction, at);
  if (const auto* waveform = std::get_if<Waveform>(&record)) return store(*waveform, at);
  if (const auto* change = std::get_if<ClockChange>(&record)) return store(*change, at);
  if (const auto* settings = std::get_if<SettingsInForce>(&record))
    return store_text(settings->from, settings->text, last_settings, insert_settings, at);
  if (const auto* calibration = std::get_if<CalibrationInForce>(&record))
    return store_text(calibration->from, calibration->text, last_calibration, insert_calibration, at);
  return store(std::get<Loss>(record));
}

Status LogbookWriter::Inside::store(const Event& event, const Place& at) {
  // Each phase has excursions of its own; the other kinds are one event of a side.
  const std::int64_t phase_key = event.kind == EventKind::out_of_band ? number_of(event.worst_phase) : 0;
  Statement& s = put_event;
  s.bind(1, at.session)
      .bind(2, number_of(event.side))
      .bind(3, static_cast<std::int64_t>(event.kind))
      .bind(4, event.begin_sample.value);
  s.bind(5, phase_key).bind(6, event.begin.value).bind(7, event.begin_window_end.value);
  s.bind(8, static_cast<std::int64_t>(event.end_reason))
      .bind(9, event.end.value)
      .bind(10, event.end_window_end.value);
  s.bind(11, event.duration_ns).bind(12, std::int64_t{event.phases}).bind(13, number_of(event.worst_phase));
  s.bind(14, event.extreme_v).bind(15, std::int64_t{event.extreme_is_bound}).bind(16, event.reference_v);
  s.bind(17, event.threshold_v)
      .bind(18, event.hysteresis_v)
      .bind(19, static_cast<std::int64_t>(event.origin));
  s.bind(20, std::string_view(event.reason));
  if (event.held_off) {
    s.bind(21, std::int64_t{*event.held_off});
  } else {
    s.bind_null(21);
  }
  s.bind(22, event.input_low_v)
      .bind(23, event.input_high_v)
      .bind(24, event.ratio_low)
      .bind(25, event.ratio_high);
  bind(s, 26, event.clock);
  return s.run();
}

Status LogbookWriter::Inside::store(const Aggregate& aggregate, const Place& at) {
  Statement& s = put_aggregate;
  s.bind(1, static_cast<std::int64_t>(aggregate.interval)).bind(2, aggregate.begin.value).bind(3, at.session);
  s.bind(4, number_of(aggregate.channel.side))
      .bind(5, number_of(aggregate.channel.phase))
      .bind(6, aggregate.end.value);
  s.bind(7, aggregate.u_rms_v)
      .bind(8, aggregate.u_min_v)
      .bind(9, aggregate.u_max_v)
      .bind(10, std::int64_t{aggregate.blocks});
  s.bind(11, aggregate.measured_ns)
      .bind(12, std::int64_t{aggregate.flagged})
      .bind(13, std::int64_t{aggregate.partial});
  s.bind(14, std::int64_t{aggregate.over_range});
  bind(s, 15, aggregate.clock);
  return s.run();
}

Status LogbookWriter::Inside::store(const Frequency& frequency, const Place& at) {
  Statement& s = put_frequency;
  s.bind(1, frequency.begin.value).bind(2, at.session).bind(3, frequency.end.value).bind(4, frequency.hz);
  s.bind(5, std::int64_t{frequency.cycles})
      .bind(6, std::int64_t{frequency.trusted})
      .bind(7, std::int64_t{frequency.flagged});
  bind(s, 8, frequency.clock);
  return s.run();
}

Status LogbookWriter::Inside::store(const RegulatorInterval& interval, const Place& at) {
  Statement& s = put_regulator_interval;
  s.bind(1, interval.begin.value)
      .bind(2, at.session)
      .bind(3, number_of(interval.phase))
      .bind(4, interval.end.value);
  s.bind(5, interval.input_half_cycles).bind(6, interval.output_half_cycles).bind(7, interval.input_in_band);
  s.bind(8, interval.output_in_band)
      .bind(9, interval.output_low)
      .bind(10, interval.output_high)
      .bind(11, interval.pairs);
  s.bind(12, interval.correctable)
      .bind(13, interval.ratio_min)
      .bind(14, interval.ratio_mean)
      .bind(15, interval.ratio_max);
  s.bind(16, std::int64_t{interval.corrections})
      .bind(17, std::int64_t{interval.reversals})
      .bind(18, interval.travel);
  s.bind(19, interval.speed_v_per_s).bind(20, std::int64_t{interval.partial});
  return s.run();
}

Status LogbookWriter::Inside::store(const Correction& correction, const Place& at) {
  Statement& s = put_correction;
  s.bind(1, correction.begin.value)
      .bind(2, at.session)
      .bind(3, number_of(correction.phase))
      .bind(4, correction.begin_sample.value);
  s.bind(5, correction.end.value)
      .bind(6, correction.ratio_before)
      .bind(7, correction.ratio_after)
      .bind(8, correction.speed_v_per_s);
  return s.run();
}

Status LogbookWriter::Inside::store(const Waveform& waveform, const Place& at) {
  insert_waveform.bind(1, at.session)
      .bind(2, waveform.begin_sample.value)
      .bind(3, waveform.begin.value)
      .bind(4, waveform.end.value);
  insert_waveform.bind(5, waveform.rate_hz);
  if (auto done = insert_waveform.run(); !done) return done;
  const std::int64_t id = database.last_row_id();
  for (const Waveform::Trace& trace : waveform.traces) {
    const std::vector<std::uint8_t> bytes = little_endian(trace.steps);
    insert_trace.bind(1, id).bind(2, number_of(trace.channel.side)).bind(3, number_of(trace.channel.phase));
    insert_trace.bind(4, static_cast<double>(trace.volts_per_step))
        .bind(5, std::span<const std::uint8_t>(bytes));
    if (auto done = insert_trace.run(); !done) return done;
  }
  return kDone;
}

Status LogbookWriter::Inside::store(const ClockChange& change, const Place& at) {
  insert_clock_change.bind(1, at.session)
      .bind(2, change.at.value)
      .bind(3, std::string_view(change.what))
      .bind(4, change.step_ns);
  bind(insert_clock_change, 5, change.after);
  return insert_clock_change.run();
}

/// A row only if the text is not what the last one says; before the first, nothing is in force.
Status LogbookWriter::Inside::store_text(UtcNs from, const std::string& text, Statement& last,
                                         Statement& insert, const Place& at) {
  const auto row = last.step();
  if (!row) return row.error();
  const bool same = row.value() ? last.text(0) == text : text.empty();
  if (row.value()) {
    if (auto done = last.run(); !done) return done;
  }
  if (same) return kDone;
  return insert.bind(1, at.session).bind(2, from.value).bind(3, std::string_view(text)).run();
}

Status LogbookWriter::Inside::store(const Loss& loss) {
  return insert_loss.bind(1, loss.at.value).bind(2, std::string_view(loss.what)).bind(3, loss.count).run();
}

// ---- pruning -----------------------------------------------------------------------------------------

namespace {

/// What may be dropped, the finest first.
struct Detail {
  const char* what;
  const char* table;
  const char* condition;                       // besides its age
  double config::LogbookSettings::*keep_days;  // nullptr: only for the budget
};
constexpr Detail kDetails[] = {
    {"3-s aggregates", "aggregate", "interval=0", &config::LogbookSettings::keep_three_seconds_days},
    {"10-s frequencies", "frequency", "1", &config::LogbookSettings::keep_ten_seconds_days},
    {"waveforms", "waveform", "1", &config::LogbookSettings::keep_waveforms_days},
    {"corrections", "correction", "1", &config::LogbookSettings::keep_corrections_days},
    {"10-min aggregates", "aggregate", "interval=1", nullptr},
    {"10-min regulator intervals", "regulator_interval", "1", nullptr},
};
constexpr std::int64_t kDayNs = 86400 * kNsPerSecond;
constexpr int kMostBudgetSteps = 4000;

}  // namespace

Result<std::int64_t> LogbookWriter::Inside::drop(const char* table, const std::string& condition,
                                                 UtcNs before) {
  auto statement =
      database.prepare(std::string("DELETE FROM ") + table + " WHERE " + condition + " AND begin_ns<?1");
  if (!statement) return statement.error();
  statement.value().bind(1, before.value);
  if (auto done = statement.value().run(); !done) return done.error();
  return database.integer_of("SELECT changes()");
}

Result<double> LogbookWriter::Inside::used_bytes() const {
  double pages[3] = {};
  const char* const pragmas[3] = {"PRAGMA page_count", "PRAGMA freelist_count", "PRAGMA page_size"};
  for (std::size_t i = 0; i < 3; ++i) {
    const auto value = database.integer_of(pragmas[i]);
    if (!value) return value.error();
    pages[i] = static_cast<double>(value.value());
  }
  return (pages[0] - pages[1]) * pages[2];
}

Result<Pruned> LogbookWriter::prune(UtcNs now, const config::LogbookSettings& settings) {
  if (auto flushed = flush(); !flushed) return flushed.error();
  Inside& in = *inside_;
  Pruned pruned;
  const auto drop = [&](const Detail& detail, const char* whose, UtcNs before, const char* why) -> Status {
    auto transaction = Transaction::begin(in.database);
    if (!transaction) return transaction.error();
    const auto rows = in.drop(detail.table, std::string(detail.condition) + " AND " + whose, before);
    if (!rows) return rows.error();
    if (rows.value() > 0) {
      auto note = in.database.prepare(
          "INSERT INTO pruned VALUES(?1,?2,?3) ON CONFLICT(what) DO UPDATE SET until_ns=max(until_ns,?2), "
          "rows=rows+?3");
      if (!note) return note.error();
      note.value().bind(1, std::string_view(detail.what)).bind(2, before.value).bind(3, rows.value());
      if (auto done = note.value().run(); !done) return done;
      pruned.rows += rows.value();
      pruned.what.push_back(std::to_string(rows.value()) + " rows of " + detail.what + " dropped: " + why);
    }
    return transaction.value().commit();
  };

  for (const Detail& detail : kDetails) {
    if (detail.keep_days == nullptr || !(settings.*detail.keep_days > 0.0)) continue;
    const auto keep_ns = static_cast<std::int64_t>(settings.*detail.keep_days * static_cast<double>(kDayNs));
    // The times of an undated session do not tell its age.
    if (auto done = drop(detail, "session IN (SELECT id FROM session WHERE dated<>0)", now - keep_ns,
                         "older than the site keeps them");
        !done)
      return done.error();
  }

  const double budget = settings.size_budget_mb * 1e6;
  auto used = in.used_bytes();
  if (!used) return used.error();
  int steps = 0;
  for (const Detail& detail : kDetails) {
    while (used.value() > budget && steps++ < kMostBudgetSteps) {
      // A tenth of what there is at a time, so that no single transaction grows large.
      const std::string where = std::string(" FROM ") + detail.table + " WHERE " + detail.condition;
      const auto rows = in.database.integer_of("SELECT count(*)" + where);
      if (!rows) return rows.error();
      if (rows.value() == 0) break;
      const std::int64_t part = std::max<std::int64_t>(1, std::min<std::int64_t>(rows.value() / 10, 20000));
      const auto until = in.database.integer_of(
          "SELECT begin_ns" + where + " ORDER BY begin_ns LIMIT 1 OFFSET " + std::to_string(part - 1));
      if (!until) return until.error();
      if (auto done = drop(detail, "1", UtcNs{until.value() + 1}, "the logbook's size budget"); !done)
        return done.error();
      used = in.used_bytes();
      if (!used) return used.error();
    }
  }
  if (auto done = in.database.execute("PRAGMA incremental_vacuum(2048)"); !done) return done.error();
  return pruned;
}

}  // namespace tramline::storage
