#include "storage/logbook_reader.hpp"

#include <cmath>
#include <filesystem>
#include <fstream>
#include <limits>
#include <utility>

#include "storage/schema.hpp"

namespace tramline::storage {
namespace {

/// Takes column `at` as one of the first `count` values of an enumeration; false if it is none.
template <class E>
bool take(const Statement& row, int at, std::int64_t count, E& into) {
  const std::int64_t value = row.integer(at);
  if (value < 0 || value >= count) return false;
  into = static_cast<E>(value);
  return true;
}

ClockState clock_of(const Statement& row, int at) {
  ClockState state;
  state.trust = row.integer(at) == 1   ? ClockTrust::synchronised
                : row.integer(at) == 2 ? ClockTrust::holdover
                                       : ClockTrust::never_set;
  if (!row.is_null(at + 1)) state.error_bound_ns = row.integer(at + 1);
  return state;
}

bool log_holds_something(const std::string& path) {
  std::error_code code;
  const auto size = std::filesystem::file_size(path + "-wal", code);
  return !code && size > 0;
}

/// Waveforms are bounded where they are written; a larger one is not from this program.
constexpr std::size_t kMostSamples = 50'000'000;

constexpr const char* kEventColumns =
    "SELECT "
    "id,session,side,kind,begin_sample,begin_ns,begin_window_end_ns,end_reason,end_ns,end_window_end_ns,"
    "duration_ns,phases,"
    "worst_phase,extreme_v,extreme_is_bound,reference_v,threshold_v,hysteresis_v,origin,reason,held_off,"
    "input_low_v,input_high_v,"
    "ratio_low,ratio_high,clock_trust,clock_error_bound_ns FROM event ";

bool event_of(const Statement& row, EventRow& out) {
  Event& event = out.event;
  out.id = row.integer(0);
  out.session = row.integer(1);
  event.begin_sample = {row.integer(4)};
  event.begin = {row.integer(5)};
  event.begin_window_end = {row.integer(6)};
  event.end = {row.integer(8)};
  event.end_window_end = {row.integer(9)};
  event.duration_ns = row.integer(10);
  event.phases = static_cast<std::uint8_t>(row.integer(11) & 7);
  event.extreme_v = row.number(13);
  event.extreme_is_bound = row.integer(14) != 0;
  event.reference_v = row.number(15);
  event.threshold_v = row.number(16);
  event.hysteresis_v = row.number(17);
  event.reason = row.text(19);
  if (!row.is_null(20)) event.held_off = row.integer(20) != 0;
  event.input_low_v = row.number(21);
  event.input_high_v = row.number(22);
  event.ratio_low = row.number(23);
  event.ratio_high = row.number(24);
  event.clock = clock_of(row, 25);
  return take(row, 2, 2, event.side) && take(row, 3, 4, event.kind) && take(row, 7, 5, event.end_reason) &&
         take(row, 12, 3, event.worst_phase) && take(row, 18, 4, event.origin);
}

}  // namespace

Result<LogbookReader> LogbookReader::open(const std::string& path) {
  std::error_code code;
  if (!std::filesystem::exists(path, code)) return Error{path, "there is no such logbook", "check the path"};
  if (std::filesystem::is_directory(path, code))
    return Error{path, "this is a folder", "name the logbook in it"};
  std::ifstream file(path, std::ios::binary);
  if (!file) return Error{path, "the logbook cannot be read", "check its permissions"};
  std::string head(15, '\0');
  file.read(head.data(), static_cast<std::streamsize>(head.size()));
  if (head != "SQLite format 3")
    return Error{path, "this is no logbook: not an SQLite file", "name a logbook"};

  auto database = Database::open(path, Database::Mode::read_only);
  if (!database) return database.error();
  // SQLite makes files beside a logbook in WAL mode even to read it. Where it may not, the logbook can be
  // read as it is, if no write-ahead log holds newer pages.
  bool unchanging = false;
  if (!database.value().execute("SELECT 1 FROM sqlite_schema LIMIT 1") &&
      database.value().failed_of_access()) {
    if (log_holds_something(path)) {
      return Error{path,
                   "what was written last is still in " + path + "-wal, and this folder may not be written",
                   "copy both files to a folder of your own, and read the copy"};
    }
    unchanging = true;
    database = Database::open(path, Database::Mode::read_unchanging);
    if (!database) return database.error();
  }
  if (auto known = check_identity(database.value()); !known) return known.error();
  if (auto known = check_tables(database.value()); !known) return known.error();
  // A logbook of version 2, which only a writer brings forward, has no such table.
  const auto version = database.value().integer_of("PRAGMA user_version");
  if (!version) return version.error();
  return LogbookReader(std::move(database).value(), unchanging, version.value() >= 3);
}

Status LogbookReader::each(const std::string& sql, const Period& period, const char* table,
                           const std::function<bool(const Statement&)>& take_row) const {
  auto statement = database_.prepare(sql);
  if (!statement) return statement.error();
  Statement& s = statement.value();
  s.bind(1, period.from ? period.from->value : std::numeric_limits<std::int64_t>::min());
  s.bind(2, period.to ? period.to->value : std::numeric_limits<std::int64_t>::max());
  for (;;) {
    const auto more = s.step();
    if (!more) return more.error();
    if (!more.value()) break;
    if (!take_row(s)) {
      return Error{database_.path(), std::string("table ") + table + " holds a value that no record can have",
                   "the file is damaged or was altered"};
    }
  }
  if (unchanging_ && log_holds_something(database_.path()))
    return Error{database_.path(), "the logbook began to be written while it was read", "ask again"};
  return kDone;
}

Result<std::vector<Session>> LogbookReader::sessions() const {
  std::vector<Session> found;
  auto done = each(
      "SELECT id,program,source,rate_hz,dated,begin_ns,why_ended,readings_every_ns FROM session WHERE ?1<=?2 "
      "ORDER BY id",
      {}, "session", [&](const Statement& row) {
        Session session{
            row.integer(0),
            {row.text(1), row.text(2), row.number(3), row.integer(4) != 0, {row.integer(5)}, row.integer(7)},
            {}};
        if (!row.is_null(6)) session.why_ended = row.text(6);
        found.push_back(std::move(session));
        return true;
      });
  if (!done) return done.error();
  return found;
}

Result<std::vector<CoverageStretch>> LogbookReader::coverage(const Period& period) const {
  std::vector<CoverageStretch> found;
  auto done = each(
      "SELECT session,begin_ns,until_ns,measured_ns,why_begun,why_ended FROM coverage WHERE until_ns>?1 AND "
      "begin_ns<?2 ORDER BY begin_ns",
      period, "coverage", [&](const Statement& row) {
        CoverageStretch stretch{row.integer(0), {row.integer(1)}, {row.integer(2)},
                                row.integer(3), row.text(4),      {}};
        if (!row.is_null(5)) stretch.why_ended = row.text(5);
        found.push_back(std::move(stretch));
        return true;
      });
  if (!done) return done.error();
  return found;
}

Result<std::vector<EventRow>> LogbookReader::events(const Period& period) const {
  std::vector<EventRow> found;
  auto done = each(
      std::string(kEventColumns) + "WHERE (end_ns>=?1 OR end_reason=0) AND begin_ns<?2 ORDER BY begin_ns,id",
      period, "event", [&](const Statement& row) { return event_of(row, found.emplace_back()); });
  if (!done) return done.error();
  return found;
}

Result<std::optional<EventRow>> LogbookReader::event(std::int64_t id) const {
  auto statement = database_.prepare(std::string(kEventColumns) + "WHERE id=?1");
  if (!statement) return statement.error();
  statement.value().bind(1, id);
  const auto row = statement.value().step();
  if (!row) return row.error();
  if (!row.value()) return std::optional<EventRow>();
  EventRow found;
  if (!event_of(statement.value(), found)) {
    return Error{database_.path(), "table event holds a value that no record can have",
                 "the file is damaged or was altered"};
  }
  return std::optional<EventRow>(std::move(found));
}

Result<std::vector<Aggregate>> LogbookReader::aggregates(Interval interval, const Period& period) const {
  std::vector<Aggregate> found;
  const std::string sql =
      "SELECT "
      "side,phase,begin_ns,end_ns,u_rms_v,u_min_v,u_max_v,blocks,measured_ns,flagged,partial,over_range,"
      "clock_trust,"
      "clock_error_bound_ns FROM aggregate WHERE interval=" +
      std::to_string(static_cast<int>(interval)) +
      " AND end_ns>?1 AND begin_ns<?2 ORDER BY begin_ns,session,side,phase";
  auto done = each(sql, period, "aggregate", [&](const Statement& row) {
    Aggregate& a = found.emplace_back();
    a.interval = interval;
    a.begin = {row.integer(2)};
    a.end = {row.integer(3)};
    a.u_rms_v = row.number(4);
    a.u_min_v = row.number(5);
    a.u_max_v = row.number(6);
    a.blocks = static_cast<std::int32_t>(row.integer(7));
    a.measured_ns = row.integer(8);
    a.flagged = row.integer(9) != 0;
    a.partial = row.integer(10) != 0;
    a.over_range = row.integer(11) != 0;
    a.clock = clock_of(row, 12);
    return take(row, 0, 2, a.channel.side) && take(row, 1, 3, a.channel.phase);
  });
  if (!done) return done.error();
  return found;
}

Result<std::vector<Frequency>> LogbookReader::frequencies(const Period& period) const {
  std::vector<Frequency> found;
  auto done = each(
      "SELECT begin_ns,end_ns,hz,cycles,trusted,flagged,clock_trust,clock_error_bound_ns FROM "
      "frequency "
      "WHERE end_ns>?1 AND begin_ns<?2 ORDER BY begin_ns,session",
      period, "frequency", [&](const Statement& row) {
        found.push_back({{row.integer(0)},
                         {row.integer(1)},
                         row.number(2),
                         static_cast<std::int32_t>(row.integer(3)),
                         row.integer(4) != 0,
                         row.integer(5) != 0,
                         clock_of(row, 6)});
        return true;
      });
  if (!done) return done.error();
  return found;
}

Result<std::vector<RegulatorInterval>> LogbookReader::regulator_intervals(const Period& period) const {
  std::vector<RegulatorInterval> found;
  auto done = each(
      "SELECT "
      "phase,begin_ns,end_ns,input_half_cycles,output_half_cycles,input_in_band,output_in_band,output_low,"
      "output_high,pairs,"
      "correctable,ratio_min,ratio_mean,ratio_max,corrections,reversals,travel,speed_v_per_s,partial FROM "
      "regulator_interval "
      "WHERE end_ns>?1 AND begin_ns<?2 ORDER BY begin_ns,session,phase",
      period, "regulator_interval", [&](const Statement& row) {
        RegulatorInterval& r = found.emplace_back();
        r.begin = {row.integer(1)};
        r.end = {row.integer(2)};
        r.input_half_cycles = row.integer(3);
        r.output_half_cycles = row.integer(4);
        r.input_in_band = row.integer(5);
        r.output_in_band = row.integer(6);
        r.output_low = row.integer(7);
        r.output_high = row.integer(8);
        r.pairs = row.integer(9);
        r.correctable = row.integer(10);
        r.ratio_min = row.number(11);
        r.ratio_mean = row.number(12);
        r.ratio_max = row.number(13);
        r.corrections = static_cast<std::int32_t>(row.integer(14));
        r.reversals = static_cast<std::int32_t>(row.integer(15));
        r.travel = row.number(16);
        r.speed_v_per_s = row.number(17);
        r.partial = row.integer(18) != 0;
        return take(row, 0, 3, r.phase);
      });
  if (!done) return done.error();
  return found;
}

Result<std::vector<Correction>> LogbookReader::corrections(const Period& period) const {
  std::vector<Correction> found;
  auto done = each(
      "SELECT phase,begin_sample,begin_ns,end_ns,ratio_before,ratio_after,speed_v_per_s FROM correction "
      "WHERE end_ns>?1 AND begin_ns<?2 ORDER BY begin_ns,session,phase",
      period, "correction", [&](const Statement& row) {
        Correction& c = found.emplace_back();
        c.begin_sample = {row.integer(1)};
        c.begin = {row.integer(2)};
        c.end = {row.integer(3)};
        c.ratio_before = row.number(4);
        c.ratio_after = row.number(5);
        c.speed_v_per_s = row.number(6);
        return take(row, 0, 3, c.phase);
      });
  if (!done) return done.error();
  return found;
}

Result<std::vector<WaveformRow>> LogbookReader::waveforms(std::int64_t session, const Period& period) const {
  std::vector<WaveformRow> found;
  auto done = each("SELECT id,begin_ns,end_ns FROM waveform WHERE end_ns>=?1 AND begin_ns<=?2 AND session=" +
                       std::to_string(session) + " ORDER BY begin_ns",
                   period, "waveform", [&](const Statement& row) {
                     found.push_back({row.integer(0), {row.integer(1)}, {row.integer(2)}});
                     return true;
                   });
  if (!done) return done.error();
  return found;
}

Result<Waveform> LogbookReader::waveform(std::int64_t id) const {
  Waveform waveform;
  bool known = false;
  auto done = each(
      "SELECT begin_sample,begin_ns,end_ns,rate_hz FROM waveform WHERE ?1<=?2 AND id=" + std::to_string(id),
      {}, "waveform", [&](const Statement& row) {
        known = true;
        waveform.begin_sample = {row.integer(0)};
        waveform.begin = {row.integer(1)};
        waveform.end = {row.integer(2)};
        waveform.rate_hz = row.number(3);
        return waveform.rate_hz > 0.0 && std::isfinite(waveform.rate_hz);
      });
  if (!done) return done.error();
  if (!known) return Error{database_.path(), "there is no waveform with number " + std::to_string(id), ""};

  done = each(
      "SELECT side,phase,volts_per_step,steps FROM trace WHERE ?1<=?2 AND waveform=" + std::to_string(id) +
          " ORDER BY side,phase",
      {}, "trace", [&](const Statement& row) {
        Waveform::Trace& trace = waveform.traces.emplace_back();
        trace.volts_per_step = static_cast<float>(row.number(2));
        const auto bytes = row.blob(3);
        if (bytes.size() / 2 > kMostSamples || !std::isfinite(trace.volts_per_step)) return false;
        trace.steps.reserve(bytes.size() / 2);
        for (std::size_t i = 0; i + 1 < bytes.size(); i += 2) {
          const unsigned bits = bytes[i] | static_cast<unsigned>(bytes[i + 1]) << 8U;
          trace.steps.push_back(static_cast<std::int16_t>(static_cast<std::uint16_t>(bits)));
        }
        const bool same_length = trace.steps.size() == waveform.traces.front().steps.size();
        return same_length && take(row, 0, 2, trace.channel.side) && take(row, 1, 3, trace.channel.phase);
      });
  if (!done) return done.error();
  return waveform;
}

Result<std::vector<ClockChange>> LogbookReader::clock_changes(const Period& period) const {
  std::vector<ClockChange> found;
  auto done = each(
      "SELECT at_ns,what,step_ns,clock_trust,clock_error_bound_ns FROM clock_change WHERE at_ns>=?1 "
      "AND at_ns<?2 ORDER BY at_ns,id",
      period, "clock_change", [&](const Statement& row) {
        found.push_back({{row.integer(0)}, row.text(1), row.integer(2), clock_of(row, 3)});
        return true;
      });
  if (!done) return done.error();
  return found;
}

Result<std::optional<std::string>> LogbookReader::settings(std::optional<UtcNs> at) const {
  std::optional<std::string> text;
  const Period until{std::nullopt, at};
  auto done = each(
      "SELECT text,from_ns FROM settings WHERE ?1<=?2 ORDER BY (from_ns<=?2) DESC, CASE WHEN from_ns<=?2 "
      "THEN -id ELSE id END LIMIT 1",
      until, "settings", [&](const Statement& row) {
        text = row.text(0);
        return true;
      });
  if (!done) return done.error();
  return text;
}

Result<std::string> LogbookReader::calibration(std::optional<UtcNs> at) const {
  if (!has_calibrations_) return std::string();
  std::string text;
  const Period until{std::nullopt, at};
  // By session, not by time: whatever their dates, a session is calibrated as its own begin says.
  auto done = each(
      "SELECT text FROM calibration WHERE ?1<=?2 AND session<=(SELECT id FROM session WHERE begin_ns<=?2 "
      "ORDER BY "
      "begin_ns DESC,id DESC LIMIT 1) ORDER BY id DESC LIMIT 1",
      until, "calibration", [&](const Statement& row) {
        text = row.text(0);
        return true;
      });
  if (!done) return done.error();
  return text;
}

Result<std::vector<CalibrationRow>> LogbookReader::calibrations() const {
  std::vector<CalibrationRow> found;
  if (!has_calibrations_) return found;
  auto done = each("SELECT session,from_ns,text FROM calibration WHERE ?1<=?2 ORDER BY id", {}, "calibration",
                   [&](const Statement& row) {
                     found.push_back({row.integer(0), {{row.integer(1)}, row.text(2)}});
                     return true;
                   });
  if (!done) return done.error();
  return found;
}

Result<std::vector<Loss>> LogbookReader::losses() const {
  std::vector<Loss> found;
  auto done = each("SELECT at_ns,what,count FROM loss WHERE ?1<=?2 ORDER BY id", {}, "loss",
                   [&](const Statement& row) {
                     found.push_back({{row.integer(0)}, row.text(1), row.integer(2)});
                     return true;
                   });
  if (!done) return done.error();
  return found;
}

Result<std::vector<PrunedDetail>> LogbookReader::pruned() const {
  std::vector<PrunedDetail> found;
  auto done = each("SELECT what,until_ns,rows FROM pruned WHERE ?1<=?2 ORDER BY what", {}, "pruned",
                   [&](const Statement& row) {
                     found.push_back({row.text(0), {row.integer(1)}, row.integer(2)});
                     return true;
                   });
  if (!done) return done.error();
  return found;
}

}  // namespace tramline::storage
