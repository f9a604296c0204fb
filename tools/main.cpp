#include <CLI/CLI.hpp>
#include <exception>
#include <iostream>

#include "config/version.hpp"
#include "tools/commands.hpp"

int main(int argc, char** argv) {
  using namespace tramline::tools;
  CLI::App app("Answers questions from the record of a mains supply and its servo regulator.", "tramline");
  app.set_version_flag("--version", std::string("tramline ") + tramline::kVersion);
  app.require_subcommand(1);
  app.footer(
      "Times of day may be given with an offset, 2026-03-01T06:00+05:30, or without one in the site's zone.\n"
      "Exit status: 0 answered; 1 answered, and the answer is bad; 2 wrong usage or input; 3 could not do "
      "it.");

  ExitStatus status = ExitStatus::answered;
  add_verdict(app, status);
  add_events(app, status);
  add_wave(app, status);
  add_import(app, status);
  add_new_site(app, status);
  add_calibrate(app, status);
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& error) {
    const int code = app.exit(error);
    return code == 0 ? 0 : static_cast<int>(ExitStatus::wrong_usage);
  } catch (const std::exception& error) {
    std::cerr << "tramline: " << error.what() << '\n';
    return static_cast<int>(ExitStatus::could_not);
  }
  return static_cast<int>(status);
}
