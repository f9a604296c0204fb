#include "tools/question.hpp"

#include <iostream>

namespace tramline::tools {

void Question::add_to(CLI::App& command) {
  command.add_option("LOGBOOK", logbook, "the logbook file")->required();
  command.add_option("--from", from, "leave out what was before this time");
  command.add_option("--to", to, "leave out what was after this time");
  command.add_flag("--json", json, "answer for programs: JSON, times in UTC");
}

ExitStatus tell(const Error& error, ExitStatus status) {
  std::cerr << "tramline: " << error.text() << '\n';
  return status;
}

}  // namespace tramline::tools
