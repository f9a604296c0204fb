#include "tools/logbook_view.hpp"

#include <algorithm>
#include <utility>

#include "config/calibration_file.hpp"
#include "config/site_file.hpp"
#include "config/time_text.hpp"
#include "tools/evidence.hpp"

namespace tramline::tools {
namespace {

Result<std::optional<UtcNs>> limit(const std::string& text, const std::string& zone, const char* option) {
  if (text.empty()) return std::optional<UtcNs>();
  const auto time = config::parse_time(text, zone);
  if (!time)
    return Error{std::string(option) + " " + time.error().where, time.error().what, time.error().remedy};
  return std::optional<UtcNs>(time.value());
}

/// The site described by the settings in force at `at`.
Result<config::Site> site_at(const storage::LogbookReader& reader, const std::string& path,
                             std::optional<UtcNs> at) {
  const auto text = reader.settings(at);
  if (!text) return text.error();
  if (!text.value()) return Error{path, "the logbook holds no site file yet", "nothing was recorded in it"};
  config::SiteFile file = config::parse_site(*text.value(), "site file in the logbook");
  if (!file.ok())
    return Error{path, "the site file kept in the logbook is not understood: " + file.fault_text(),
                 "use a newer version"};
  return std::move(*file.site);
}

}  // namespace

Result<LogbookView> open_view(const std::string& path, const std::string& from, const std::string& to) {
  auto reader = storage::LogbookReader::open(path);
  if (!reader) return reader.error();
  auto sessions = reader.value().sessions();
  if (!sessions) return sessions.error();
  // The zone in which the period is meant comes from the newest site file, the site itself from the one in
  // force at its end.
  auto newest = site_at(reader.value(), path, std::nullopt);
  if (!newest) return newest.error();
  const auto begin = limit(from, newest.value().zone, "--from");
  if (!begin) return begin.error();
  const auto end = limit(to, newest.value().zone, "--to");
  if (!end) return end.error();
  if (begin.value() && end.value() && *end.value() <= *begin.value()) {
    return Error{"--to " + to, "the period ends before it begins", "give a later --to or an earlier --from"};
  }
  auto site = end.value() ? site_at(reader.value(), path, end.value()) : std::move(newest);
  if (!site) return site.error();
  return LogbookView(std::move(reader).value(), std::move(sessions).value(), std::move(site).value(),
                     {begin.value(), end.value()});
}

bool LogbookView::dated(std::int64_t session) const {
  const auto found = std::find_if(sessions_.begin(), sessions_.end(),
                                  [&](const storage::Session& s) { return s.id == session; });
  return found == sessions_.end() || found->begin.dated;
}

std::int64_t LogbookView::readings_every_ns(std::int64_t session) const {
  const auto found = std::find_if(sessions_.begin(), sessions_.end(),
                                  [&](const storage::Session& s) { return s.id == session; });
  return found == sessions_.end() ? 0 : found->begin.readings_every_ns;
}

std::string LogbookView::when(const storage::EventRow& row) const {
  if (!dated(row.session)) return config::format_duration(row.event.begin.value) + " from the begin";
  return config::format_in_zone(row.event.begin, site_.zone);
}

Result<std::vector<storage::EventRow>> LogbookView::events() const {
  return reader_.events(period_);
}

Result<storage::EventRow> LogbookView::event(std::int64_t id) const {
  auto row = reader_.event(id);
  if (!row) return row.error();
  if (!row.value())
    return Error{"event " + std::to_string(id), "there is no event with this number",
                 "see `tramline events`"};
  return std::move(*row.value());
}

Result<storage::Waveform> LogbookView::waveform_of(const storage::EventRow& row, bool around_end) const {
  const storage::Event& event = row.event;
  const UtcNs at = around_end ? event.end : event.begin;
  const auto found = reader_.waveforms(row.session, {at, at});
  if (!found) return found.error();
  if (found.value().empty()) {
    return Error{
        "event " + std::to_string(row.id),
        std::string("no waveform was kept around its ") + (around_end ? "end" : "begin"),
        "excursions from the band alone have none; a day's allowance or pruning may have left it out"};
  }
  return reader_.waveform(around_end ? found.value().back().id : found.value().front().id);
}

namespace {

/// A calibration changes between sessions only: each stretch has that of its session.
Status add_calibrations(const storage::LogbookReader& reader, const std::string& path,
                        const std::vector<storage::CoverageStretch>& coverage, Evidence& evidence) {
  const auto rows = reader.calibrations();
  if (!rows) return rows.error();
  for (const storage::CoverageStretch& stretch : coverage) {
    std::string text;
    for (const storage::CalibrationRow& row : rows.value()) {
      if (row.session <= stretch.session) text = row.calibration.text;
    }
    if (!evidence.calibrations.empty() && evidence.calibrations.back().calibration.text == text) continue;
    CalibrationSince since{stretch.begin, {}};
    if (!text.empty()) {
      config::Findings findings;
      since.calibration = config::parse_calibration(text, "calibration in the logbook", findings);
      if (!findings.faults.empty())
        return Error{path,
                     "the calibration kept in the logbook is not understood: " +
                         findings.faults.front().text("calibration"),
                     "use a newer version"};
    }
    evidence.calibrations.push_back(std::move(since));
  }
  return kDone;
}

}  // namespace

Result<Evidence> gather(const std::string& path, const std::string& from, const std::string& to) {
  auto view = open_view(path, from, to);
  if (!view) return view.error();
  const storage::LogbookReader& reader = view.value().reader();
  const storage::Period& period = view.value().period();

  Evidence evidence;
  evidence.site = view.value().site();
  evidence.from = period.from;
  evidence.to = period.to;
  for (const storage::Session& session : view.value().sessions()) {
    evidence.dated = evidence.dated && session.begin.dated;
    evidence.program = session.begin.program;
    evidence.source = session.begin.source;
  }
  auto coverage = reader.coverage(period);
  if (!coverage) return coverage.error();
  for (const auto& stretch : coverage.value()) {
    evidence.coverage.push_back(
        {stretch.begin, stretch.until, stretch.measured_ns, stretch.why_ended.value_or("")});
    const std::int64_t every_ns = view.value().readings_every_ns(stretch.session);
    evidence.readings_every_ns = std::max(evidence.readings_every_ns, every_ns);
    evidence.sampled = evidence.sampled || every_ns == 0;
  }
  if (auto done = add_calibrations(reader, path, coverage.value(), evidence); !done) return done.error();
  auto intervals = reader.regulator_intervals(period);
  if (!intervals) return intervals.error();
  evidence.intervals = std::move(intervals).value();
  auto ten_minutes = reader.aggregates(storage::Interval::ten_minutes, period);
  if (!ten_minutes) return ten_minutes.error();
  evidence.ten_minutes = std::move(ten_minutes).value();
  auto events = reader.events(period);
  if (!events) return events.error();
  for (auto& row : events.value())
    evidence.events.push_back(std::move(row.event));
  auto losses = reader.losses();
  if (!losses) return losses.error();
  for (const storage::Loss& loss : losses.value()) {
    if (loss.what.starts_with("waveform")) continue;  // a waveform left out changes no figure
    evidence.records_lost += loss.count;
  }
  return evidence;
}

}  // namespace tramline::tools
