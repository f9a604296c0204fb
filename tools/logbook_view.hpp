#pragma once

#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "storage/logbook_reader.hpp"
#include "storage/records.hpp"

namespace tramline::tools {

/// A logbook opened for a question: the records of a period, and the site whose file was in force at its end.
class LogbookView {
 public:
  [[nodiscard]] const config::Site& site() const { return site_; }
  [[nodiscard]] const storage::LogbookReader& reader() const { return reader_; }
  [[nodiscard]] const storage::Period& period() const { return period_; }
  [[nodiscard]] const std::vector<storage::Session>& sessions() const { return sessions_; }

  /// Whether the records of a session have a date.
  [[nodiscard]] bool dated(std::int64_t session) const;
  /// Not 0: the session has no samples but r.m.s. readings so far apart.
  [[nodiscard]] std::int64_t readings_every_ns(std::int64_t session) const;
  /// Begin of an event for people: in the site's zone, or from the recording's begin.
  [[nodiscard]] std::string when(const storage::EventRow& row) const;

  [[nodiscard]] Result<std::vector<storage::EventRow>> events() const;
  [[nodiscard]] Result<storage::EventRow> event(std::int64_t id) const;
  /// The waveform kept around the begin (or the end) of an event.
  [[nodiscard]] Result<storage::Waveform> waveform_of(const storage::EventRow& row, bool around_end) const;

 private:
  friend Result<LogbookView> open_view(const std::string&, const std::string&, const std::string&);
  LogbookView(storage::LogbookReader reader, std::vector<storage::Session> sessions, config::Site site,
              storage::Period period)
      : reader_(std::move(reader)), sessions_(std::move(sessions)), site_(std::move(site)), period_(period) {}

  storage::LogbookReader reader_;
  std::vector<storage::Session> sessions_;
  config::Site site_;
  storage::Period period_;
};

/// Opens the logbook at `path` for the period given as people write times ("" for no limit), in the site's
/// zone.
[[nodiscard]] Result<LogbookView> open_view(const std::string& path, const std::string& from,
                                            const std::string& to);

}  // namespace tramline::tools
