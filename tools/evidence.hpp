#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "storage/records.hpp"

namespace tramline::tools {

/// A stretch of measuring without a hole.
struct Measured {
  UtcNs begin;
  UtcNs end;
  std::int64_t measured_ns = 0;
  std::string why_ended;  ///< empty while it goes on
};

/// What the sensors were calibrated with, from a time on.
struct CalibrationSince {
  UtcNs from;
  config::Calibration calibration;  ///< without channels: they were not
};

/// What the verdict is drawn from: the records of the period asked about.
struct Evidence {
  config::Site site;
  std::string program;  ///< what wrote the logbook
  std::string source;   ///< where the samples came from
  bool dated = true;
  std::int64_t readings_every_ns =
      0;                      ///< the coarsest of the period's sessions that only had r.m.s. readings
  bool sampled = false;       ///< a session of the period had samples
  std::optional<UtcNs> from;  ///< as asked; absent: from the first record
  std::optional<UtcNs> to;
  std::vector<Measured> coverage;
  std::vector<CalibrationSince>
      calibrations;  ///< that the period was measured with, a new one for each change
  std::vector<storage::RegulatorInterval> intervals;
  std::vector<storage::Aggregate> ten_minutes;
  std::vector<storage::Event> events;
  std::int64_t records_lost = 0;
};

/// Reads the evidence for a period, given as people write times ("" for no limit), from the logbook at
/// `path`. The site is the one in force at the end of the period.
[[nodiscard]] Result<Evidence> gather(const std::string& path, const std::string& from,
                                      const std::string& to);

}  // namespace tramline::tools
