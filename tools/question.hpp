#pragma once

#include <CLI/CLI.hpp>
#include <string>

#include "config/result.hpp"
#include "tools/commands.hpp"

namespace tramline::tools {

/// What the questions to a logbook have in common: its path, the period, the form of the answer.
struct Question {
  std::string logbook;
  std::string from;
  std::string to;
  bool json = false;

  void add_to(CLI::App& command);
};

/// Prints an error to the error stream and gives the exit status it calls for.
ExitStatus tell(const Error& error, ExitStatus status);

}  // namespace tramline::tools
