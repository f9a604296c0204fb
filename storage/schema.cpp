#include "storage/schema.hpp"

#include <algorithm>
#include <array>
#include <string>
#include <vector>

namespace tramline::storage {
namespace {

constexpr const char* kVersion1 = R"sql(
CREATE TABLE session(
  id INTEGER PRIMARY KEY,
  program TEXT NOT NULL,
  source TEXT NOT NULL,
  rate_hz REAL NOT NULL,
  dated INTEGER NOT NULL,
  begin_ns INTEGER NOT NULL,
  why_ended TEXT);
CREATE TABLE coverage(
  id INTEGER PRIMARY KEY,
  session INTEGER NOT NULL REFERENCES session(id),
  begin_sample INTEGER NOT NULL,
  begin_ns INTEGER NOT NULL,
  until_ns INTEGER NOT NULL,
  measured_ns INTEGER NOT NULL,
  why_begun TEXT NOT NULL,
  why_ended TEXT);
CREATE INDEX coverage_by_begin ON coverage(begin_ns);
CREATE TABLE event(
  id INTEGER PRIMARY KEY,
  session INTEGER NOT NULL REFERENCES session(id),
  side INTEGER NOT NULL,
  kind INTEGER NOT NULL,
  begin_sample INTEGER NOT NULL,
  phase_key INTEGER NOT NULL,
  begin_ns INTEGER NOT NULL,
  begin_window_end_ns INTEGER NOT NULL,
  end_reason INTEGER NOT NULL,
  end_ns INTEGER NOT NULL,
  end_window_end_ns INTEGER NOT NULL,
  duration_ns INTEGER NOT NULL,
  phases INTEGER NOT NULL,
  worst_phase INTEGER NOT NULL,
  extreme_v REAL,
  extreme_is_bound INTEGER NOT NULL,
  reference_v REAL NOT NULL,
  threshold_v REAL NOT NULL,
  hysteresis_v REAL NOT NULL,
  origin INTEGER NOT NULL,
  reason TEXT NOT NULL,
  held_off INTEGER,
  input_low_v REAL,
  input_high_v REAL,
  ratio_low REAL,
  ratio_high REAL,
  clock_synchronised INTEGER NOT NULL,
  clock_error_bound_ns INTEGER,
  UNIQUE(session, side, kind, begin_sample, phase_key));
CREATE INDEX event_by_begin ON event(begin_ns);
CREATE TABLE aggregate(
  interval INTEGER NOT NULL,
  begin_ns INTEGER NOT NULL,
  session INTEGER NOT NULL,
  side INTEGER NOT NULL,
  phase INTEGER NOT NULL,
  end_ns INTEGER NOT NULL,
  u_rms_v REAL,
  u_min_v REAL,
  u_max_v REAL,
  blocks INTEGER NOT NULL,
  measured_ns INTEGER NOT NULL,
  flagged INTEGER NOT NULL,
  partial INTEGER NOT NULL,
  over_range INTEGER NOT NULL,
  clock_synchronised INTEGER NOT NULL,
  clock_error_bound_ns INTEGER,
  PRIMARY KEY(interval, begin_ns, session, side, phase)) WITHOUT ROWID;
CREATE TABLE frequency(
  begin_ns INTEGER NOT NULL,
  session INTEGER NOT NULL,
  end_ns INTEGER NOT NULL,
  hz REAL,
  cycles INTEGER NOT NULL,
  trusted INTEGER NOT NULL,
  flagged INTEGER NOT NULL,
  clock_synchronised INTEGER NOT NULL,
  clock_error_bound_ns INTEGER,
  PRIMARY KEY(begin_ns, session)) WITHOUT ROWID;
CREATE TABLE regulator_interval(
  begin_ns INTEGER NOT NULL,
  session INTEGER NOT NULL,
  phase INTEGER NOT NULL,
  end_ns INTEGER NOT NULL,
  input_half_cycles INTEGER NOT NULL,
  output_half_cycles INTEGER NOT NULL,
  input_in_band INTEGER NOT NULL,
  output_in_band INTEGER NOT NULL,
  output_low INTEGER NOT NULL,
  output_high INTEGER NOT NULL,
  pairs INTEGER NOT NULL,
  correctable INTEGER NOT NULL,
  ratio_min REAL,
  ratio_mean REAL,
  ratio_max REAL,
  corrections INTEGER NOT NULL,
  reversals INTEGER NOT NULL,
  travel REAL NOT NULL,
  speed_v_per_s REAL,
  partial INTEGER NOT NULL,
  PRIMARY KEY(begin_ns, session, phase)) WITHOUT ROWID;
CREATE TABLE correction(
  begin_ns INTEGER NOT NULL,
  session INTEGER NOT NULL,
  phase INTEGER NOT NULL,
  begin_sample INTEGER NOT NULL,
  end_ns INTEGER NOT NULL,
  ratio_before REAL NOT NULL,
  ratio_after REAL NOT NULL,
  speed_v_per_s REAL NOT NULL,
  PRIMARY KEY(begin_ns, session, phase)) WITHOUT ROWID;
CREATE TABLE waveform(
  id INTEGER PRIMARY KEY,
  session INTEGER NOT NULL REFERENCES session(id),
  begin_sample INTEGER NOT NULL,
  begin_ns INTEGER NOT NULL,
  end_ns INTEGER NOT NULL,
  rate_hz REAL NOT NULL);
CREATE INDEX waveform_by_begin ON waveform(begin_ns);
CREATE TABLE trace(
  waveform INTEGER NOT NULL REFERENCES waveform(id) ON DELETE CASCADE,
  side INTEGER NOT NULL,
  phase INTEGER NOT NULL,
  volts_per_step REAL NOT NULL,
  steps BLOB NOT NULL,
  PRIMARY KEY(waveform, side, phase));
CREATE TABLE clock_change(
  id INTEGER PRIMARY KEY,
  session INTEGER NOT NULL REFERENCES session(id),
  at_ns INTEGER NOT NULL,
  what TEXT NOT NULL,
  step_ns INTEGER NOT NULL,
  clock_synchronised INTEGER NOT NULL,
  clock_error_bound_ns INTEGER);
CREATE TABLE settings(
  id INTEGER PRIMARY KEY,
  session INTEGER NOT NULL REFERENCES session(id),
  from_ns INTEGER NOT NULL,
  text TEXT NOT NULL);
CREATE TABLE service_note(
  id INTEGER PRIMARY KEY,
  at_ns INTEGER NOT NULL,
  text TEXT NOT NULL);
CREATE TABLE loss(
  id INTEGER PRIMARY KEY,
  at_ns INTEGER NOT NULL,
  what TEXT NOT NULL,
  count INTEGER NOT NULL);
CREATE TABLE pruned(
  what TEXT PRIMARY KEY,
  until_ns INTEGER NOT NULL,
  rows INTEGER NOT NULL) WITHOUT ROWID;
)sql";

constexpr const char* kVersion2 = R"sql(
ALTER TABLE session ADD COLUMN readings_every_ns INTEGER NOT NULL DEFAULT 0;
ALTER TABLE event RENAME COLUMN clock_synchronised TO clock_trust;
ALTER TABLE aggregate RENAME COLUMN clock_synchronised TO clock_trust;
ALTER TABLE frequency RENAME COLUMN clock_synchronised TO clock_trust;
ALTER TABLE clock_change RENAME COLUMN clock_synchronised TO clock_trust;
)sql";

constexpr const char* kVersion3 = R"sql(
CREATE TABLE calibration(
  id INTEGER PRIMARY KEY,
  session INTEGER NOT NULL REFERENCES session(id),
  from_ns INTEGER NOT NULL,
  text TEXT NOT NULL);
)sql";

constexpr std::array<Migration, 3> kMigrations = {{{kVersion1}, {kVersion2}, {kVersion3}}};

/// Each table, index, view and trigger with the statement that made it, by name.
Result<std::vector<std::string>> objects_of(const Database& database, const char* condition) {
  auto statement = database.prepare(
      std::string("SELECT type||' '||name||' '||coalesce(sql,'') FROM sqlite_schema WHERE ") + condition +
      " ORDER BY type,name");
  if (!statement) return statement.error();
  std::vector<std::string> found;
  for (;;) {
    const auto row = statement.value().step();
    if (!row) return row.error();
    if (!row.value()) return found;
    found.push_back(statement.value().text(0));
  }
}

}  // namespace

std::span<const Migration> migrations() {
  return kMigrations;
}

Status migrate(Database& database, std::span<const Migration> steps) {
  auto version = database.integer_of("PRAGMA user_version");
  if (!version) return version.error();
  for (auto v = static_cast<std::size_t>(version.value()); v < steps.size(); ++v) {
    auto transaction = Transaction::begin(database);
    if (!transaction) return transaction.error();
    if (auto done = database.execute(steps[v].sql); !done) return done.error();
    if (auto done = database.execute("PRAGMA user_version=" + std::to_string(v + 1)); !done)
      return done.error();
    if (auto done = transaction.value().commit(); !done) return done.error();
  }
  return kDone;
}

Status check_tables(const Database& database) {
  const Error strange{database.path(), "its tables are not those of a logbook",
                      "the file is damaged or was altered; keep a copy of it"};
  const auto version = database.integer_of("PRAGMA user_version");
  if (!version) return version.error();
  if (version.value() < 0 || version.value() > newest_schema()) return strange;
  auto model = Database::open(":memory:", Database::Mode::read_write_create);
  if (!model) return model.error();
  const auto steps = migrations().first(static_cast<std::size_t>(version.value()));
  if (auto done = migrate(model.value(), steps); !done) return done;

  const auto wanted = objects_of(model.value(), "name NOT LIKE 'sqlite_%'");
  const auto found = objects_of(database, "name NOT LIKE 'sqlite_%' AND type IN ('table','index')");
  const auto active = objects_of(database, "type NOT IN ('table','index')");
  for (const auto* list : {&wanted, &found, &active}) {
    if (!*list) return list->error();
  }
  // An index of somebody's own does no harm.
  const bool complete =
      std::includes(found.value().begin(), found.value().end(), wanted.value().begin(), wanted.value().end());
  return complete && active.value().empty() ? Status(kDone) : Status(strange);
}

Status check_identity(const Database& database) {
  const auto application = database.integer_of("PRAGMA application_id");
  if (!application) return application.error();
  if (application.value() != kApplicationId) {
    return Error{database.path(), "this is an SQLite file, but no Tramline logbook",
                 "name a logbook; this file was not touched"};
  }
  const auto version = database.integer_of("PRAGMA user_version");
  if (!version) return version.error();
  if (version.value() > newest_schema()) {
    return Error{database.path(),
                 "written by a newer version (schema " + std::to_string(version.value()) +
                     "; this program knows up to " + std::to_string(newest_schema()) + ")",
                 "use that version, or a newer one"};
  }
  return kDone;
}

}  // namespace tramline::storage
