#pragma once

#include <string>
#include <variant>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/source.hpp"
#include "daemon/measure/meter.hpp"
#include "daemon/measure/polled_meter.hpp"
#include "daemon/regulator/regulator_watch.hpp"
#include "storage/records.hpp"

namespace tramline {

/// The way of a sample (of a polled meter: of a reading): block, measurement core, regulator watch, records.
/// The daemon and the import of a recording both go through here. One thread; `site` must outlive it.
class Pipeline {
 public:
  /// `why`: the reason of the first coverage record, "daemon started".
  Pipeline(const config::Site& site, const acquire::StreamInfo& stream, std::string why);

  /// Takes the next block; appends what follows from it, in the order of time, to `out`.
  void take(const measure::Block& block, std::vector<storage::Record>& out);

  /// Measuring ends for this reason: appends what is still open and the intervals in progress.
  void finish(storage::EventEnd reason, const std::string& why, std::vector<storage::Record>& out);

  /// State of the clock, for the records to come.
  void clock_state(const storage::ClockState& state);

  /// The half-cycle values that the last `take()` gave, for a live view.
  [[nodiscard]] const std::vector<measure::HalfCycle>& half_cycles() const { return metered_.half_cycles; }

 private:
  void pass_on(std::vector<storage::Record>& out);

  std::variant<measure::Meter, measure::PolledMeter> meter_;
  regulator::RegulatorWatch watch_;
  measure::MeterOutput metered_;
};

}  // namespace tramline
