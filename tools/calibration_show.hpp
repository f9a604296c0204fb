#pragma once

#include <string>

#include "config/site.hpp"
#include "tools/commands.hpp"

namespace tramline::tools {

struct ShowRequest {
  std::string site_file;
  std::string logbook;  ///< whose history is asked for; empty: none
  bool json = false;
};

/// Prints the calibration in force at a site, and the changes that a logbook holds. `answered_bad` if one is
/// past due on `today`.
ExitStatus show_calibration(const ShowRequest& request, const config::Site& site, UtcNs today);

}  // namespace tramline::tools
