#pragma once

#include <chrono>
#include <functional>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/source.hpp"
#include "daemon/probe_figures.hpp"

namespace tramline {

/// How long the probe waits, and how it tells the time and passes it. Tests hand in a clock of their own.
struct ProbePace {
  double seconds = 5.0;            ///< of samples that are wanted
  double connect_within_s = 15.0;  ///< a live source that is still connecting after this is given up
  double silence_s = 10.0;  ///< as is one that gives nothing for so long; of a polled meter, 3 readings
  std::function<std::chrono::nanoseconds()> steady_now;
  std::function<void(std::chrono::milliseconds)> pause;
  std::function<void(double done)> progress = [](double) {};  ///< 0 to 1
};

/// Waits until `source` is ready, reads what is wanted or all there is, and takes the figures. Simulator and
/// recording are read as fast as they go. An Error: it could not be opened or read, or gave nothing.
[[nodiscard]] Result<ProbeFigures> probe_source(const config::Site& site, acquire::Source& source,
                                                const ProbePace& pace);

/// What `tramlined --probe` leaves behind for the shell.
enum class ProbeExit : int { fine = 0, must_be_fixed = 1, wrong_input = 2, could_not = 3 };

struct ProbeOptions {
  double seconds = 5.0;
  bool json = false;
};

/// The whole of `tramlined --probe`: reads the site file, opens its source, prints the report to the standard
/// output. Writes nothing anywhere; the logbook is not touched.
ProbeExit run_probe(const std::string& site_file, const ProbeOptions& options);

}  // namespace tramline
