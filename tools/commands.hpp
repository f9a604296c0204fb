#pragma once

#include <CLI/CLI.hpp>

/// The commands of `tramline`, one file each. Each adds itself to the command line and, when chosen, runs and
/// says how it went.
namespace tramline::tools {

/// What a command leaves behind for the shell.
enum class ExitStatus : int {
  answered = 0,
  answered_bad = 1,  ///< answered, and the answer is bad: band not held
  wrong_usage = 2,   ///< wrong usage or wrong input
  could_not = 3,
};

void add_verdict(CLI::App& app, ExitStatus& status);
void add_events(CLI::App& app, ExitStatus& status);
void add_wave(CLI::App& app, ExitStatus& status);
void add_import(CLI::App& app, ExitStatus& status);
void add_new_site(CLI::App& app, ExitStatus& status);
void add_calibrate(CLI::App& app, ExitStatus& status);

}  // namespace tramline::tools
