#pragma once

#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "storage/records.hpp"

namespace tramline::storage {

struct OpenOptions {
  /// A damaged logbook, or a file that is no SQLite at all, is renamed to NAME.damaged-TIME and a new logbook
  /// begun, the damage recorded in it; else it is an Error. Somebody else's SQLite file is always an Error.
  bool set_aside_damaged = false;
  /// For an import: events too are committed only in large batches, at `flush()` and when the writer goes.
  bool in_large_batches = false;
  UtcNs now;  ///< the time that a set-aside file and its loss record are given
};

/// What a pruning did, for the log.
struct Pruned {
  std::int64_t rows = 0;
  std::vector<std::string> what;  ///< a sentence a table
};

/// Writes records into a logbook, an SQLite file in WAL mode; LOGBOOK.md describes it.
///
/// Events, coverage, sessions, clock changes, settings and losses are durable when `write()` returns (one
/// transaction, synchronous=FULL). Aggregates, frequencies, regulator intervals, corrections and waveforms
/// wait in memory and go with the next of those or with `flush()`, which spares flash; at most 5000 wait. One
/// thread; has no clock of its own.
class LogbookWriter {
 public:
  /// Opens the logbook at `path`, or begins one. What an earlier run left open (its events, its coverage) is
  /// closed as cut off at the last time known.
  [[nodiscard]] static Result<LogbookWriter> open(const std::string& path, const OpenOptions& options);

  LogbookWriter(LogbookWriter&&) noexcept;
  LogbookWriter& operator=(LogbookWriter&&) noexcept;
  /// Writes what waits, as far as that succeeds; call `flush()` before to know.
  ~LogbookWriter();

  /// What `open()` found and did, a sentence each, for the log.
  [[nodiscard]] const std::vector<std::string>& opening_remarks() const;

  /// Takes the records out of `records`. On an Error nothing was written and `records` is as it was: it may
  /// be tried again. The first record must be a SessionBegin.
  [[nodiscard]] Status write(std::vector<Record>& records);

  /// Commits what waits.
  [[nodiscard]] Status flush();

  /// Drops detail older than `settings` keeps; then, while the file is larger than its budget, the oldest of
  /// the finest detail: 3-s aggregates, 10-s frequencies, waveforms, corrections, 10-min aggregates and
  /// regulator intervals. Events, coverage and 2-h aggregates are never dropped. How far each table was
  /// pruned is recorded. No full rewrite of the file.
  [[nodiscard]] Result<Pruned> prune(UtcNs now, const config::LogbookSettings& settings);

 private:
  struct Inside;
  explicit LogbookWriter(std::unique_ptr<Inside> inside);
  std::unique_ptr<Inside> inside_;
};

}  // namespace tramline::storage
