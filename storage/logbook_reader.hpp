#pragma once

#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "storage/records.hpp"
#include "storage/sqlite.hpp"

namespace tramline::storage {

/// [from, to): records that reach into it count as within.
struct Period {
  std::optional<UtcNs> from;
  std::optional<UtcNs> to;
};

struct Session {
  std::int64_t id = 0;
  SessionBegin begin;
  std::optional<std::string> why_ended;  ///< nothing: it goes on
};

struct CoverageStretch {
  std::int64_t session = 0;
  UtcNs begin;
  UtcNs until;
  std::int64_t measured_ns = 0;
  std::string why_begun;
  std::optional<std::string> why_ended;  ///< nothing: it goes on
};

struct EventRow {
  std::int64_t id = 0;
  std::int64_t session = 0;
  Event event;
};

struct WaveformRow {
  std::int64_t id = 0;
  UtcNs begin;
  UtcNs end;
};

/// From a session on, a calibration was in force.
struct CalibrationRow {
  std::int64_t session = 0;
  CalibrationInForce calibration;  ///< an empty text: from here on none
};

/// How far back detail of one sort was dropped.
struct PrunedDetail {
  std::string what;
  UtcNs until;
  std::int64_t rows = 0;
};

/// Reads a logbook, also while the daemon writes it. Everything comes in the order of time. What a stranger
/// may have put into the file is checked; a value that no record can hold is an Error with its table. One
/// thread.
class LogbookReader {
 public:
  /// A logbook that was closed in good order can also be read where nothing may be written (a folder of
  /// somebody else's, a read-only disk).
  [[nodiscard]] static Result<LogbookReader> open(const std::string& path);

  [[nodiscard]] Result<std::vector<Session>> sessions() const;
  [[nodiscard]] Result<std::vector<CoverageStretch>> coverage(const Period& period) const;
  /// An event that is still going on reaches into every later period.
  [[nodiscard]] Result<std::vector<EventRow>> events(const Period& period) const;
  /// Nothing: there is no event with this number.
  [[nodiscard]] Result<std::optional<EventRow>> event(std::int64_t id) const;
  [[nodiscard]] Result<std::vector<Aggregate>> aggregates(Interval interval, const Period& period) const;
  [[nodiscard]] Result<std::vector<Frequency>> frequencies(const Period& period) const;
  [[nodiscard]] Result<std::vector<RegulatorInterval>> regulator_intervals(const Period& period) const;
  [[nodiscard]] Result<std::vector<Correction>> corrections(const Period& period) const;
  /// Waveforms of a session that reach into the period.
  [[nodiscard]] Result<std::vector<WaveformRow>> waveforms(std::int64_t session, const Period& period) const;
  [[nodiscard]] Result<Waveform> waveform(std::int64_t id) const;
  [[nodiscard]] Result<std::vector<ClockChange>> clock_changes(const Period& period) const;
  /// The site file in force at `at` (the last one before it, else the first); nothing if the logbook holds
  /// none.
  [[nodiscard]] Result<std::optional<std::string>> settings(std::optional<UtcNs> at) const;
  /// The text of the calibration file in force at `at`: that of the session which had begun last by then (at
  /// the end, if no time is given). Empty if the sensors had none.
  [[nodiscard]] Result<std::string> calibration(std::optional<UtcNs> at) const;
  /// Every change of it, in the order in which they were made. A session's is that of the last row with its
  /// number or a lower one.
  [[nodiscard]] Result<std::vector<CalibrationRow>> calibrations() const;
  [[nodiscard]] Result<std::vector<Loss>> losses() const;
  [[nodiscard]] Result<std::vector<PrunedDetail>> pruned() const;

 private:
  LogbookReader(Database database, bool unchanging, std::int64_t version)
      : database_(std::move(database)), unchanging_(unchanging), version_(version) {}
  /// A logbook of version 1, which only a writer brings forward, has other names and lacks some columns.
  [[nodiscard]] Result<Statement> prepare(std::string sql) const;
  [[nodiscard]] bool has_calibrations() const { return version_ >= 2; }
  [[nodiscard]] Status each(const std::string& sql, const Period& period, const char* table,
                            const std::function<bool(const Statement&)>& take) const;

  Database database_;
  bool unchanging_ = false;  ///< opened as a file that nobody writes
  std::int64_t version_;
};

}  // namespace tramline::storage
