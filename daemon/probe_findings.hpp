#pragma once

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "config/site.hpp"
#include "daemon/probe_figures.hpp"

/// What the probe's figures mean for the installation. Pure.
namespace tramline {

enum class Severity { must_be_fixed, look_at_it, fine };

/// What a finding is about.
enum class Matter {
  too_short,        ///< too few samples in a row to judge by
  dead,             ///< no voltage worth the name, or a constant
  clipping,         ///< the sensor or the converter is at its limit
  rectified,        ///< half or full waves of one sign
  dc,               ///< more d.c. than a mains supply has
  noise,            ///< more than the resolution that is needed
  missing,          ///< samples are missing
  line,             ///< bytes that were no frame came over the line
  rate,             ///< the sample rate is not what the device says
  frequency,        ///< not a mains of the site's frequency
  reversed,         ///< a sensor the other way round
  phases_confused,  ///< a sensor on another phase than declared
  phase_order,      ///< L1, L2, L3 follow each other the other way round
  skew,             ///< input and output are not taken at the same time
  swapped,          ///< input and output exchanged
  same_signal,      ///< both sensors seem to see the same voltage
  ratio,            ///< U_out / U_in outside what the regulator can do
  scale,            ///< wrong by a usual factor
  out_of_band,      ///< the output stands outside the band
  not_judged,       ///< what these figures cannot tell
};

[[nodiscard]] std::string_view name_of(Severity severity);
[[nodiscard]] std::string_view name_of(Matter matter);

struct Finding {
  Severity severity = Severity::fine;
  Matter matter = Matter::not_judged;
  std::vector<std::size_t> channels;  ///< which it concerns; empty: the site as a whole
  std::string what;                   ///< a sentence with its figures
  std::string remedy;                 ///< what to do; empty: nothing
};

/// "input", or "input L1" where there are three phases.
[[nodiscard]] std::string channel_name(const config::Site& site, const Channel& channel);

/// Every finding, worst first; of equal severity in the order of `Matter`. A finding claims no more than its
/// figures bear: where an honest supply could give them as well, it says so, and is no more than looked at.
[[nodiscard]] std::vector<Finding> judged(const config::Site& site, const ProbeFigures& figures);

}  // namespace tramline
