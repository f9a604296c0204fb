#pragma once

#include <string>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/source.hpp"
#include "daemon/probe_figures.hpp"
#include "daemon/probe_findings.hpp"

/// The probe's answer, for people and for programs. Pure.
namespace tramline {

/// Cautions, the figures in a table, the findings worst first, one closing line; no colour.
[[nodiscard]] std::string probe_text(const config::Site& site, const acquire::StreamInfo& info,
                                     const ProbeFigures& figures, const std::vector<Finding>& findings);

/// One JSON object. What was not measured is null.
[[nodiscard]] std::string probe_json(const config::Site& site, const acquire::StreamInfo& info,
                                     const ProbeFigures& figures, const std::vector<Finding>& findings);

}  // namespace tramline
