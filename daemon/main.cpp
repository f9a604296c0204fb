#include <CLI/CLI.hpp>
#include <exception>
#include <iostream>
#include <string>

#include "config/site_file.hpp"
#include "config/version.hpp"
#include "daemon/log.hpp"
#include "daemon/service.hpp"

namespace {

int check(const std::string& path) {
  const tramline::config::SiteFile file = tramline::config::read_site_file(path);
  std::cerr << file.fault_text() << file.remark_text();
  if (!file.ok()) {
    std::cerr << path << ": " << file.faults.size() << (file.faults.size() == 1 ? " fault\n" : " faults\n");
    return static_cast<int>(tramline::ServiceExit::wrong_input);
  }
  std::cout << path << ": no faults\n";
  return 0;
}

}  // namespace

int main(int argc, char** argv) {
  CLI::App app("Samples a mains supply and its servo regulator, measures, and keeps the logbook.",
               "tramlined");
  std::string site_file;
  bool only_check = false;
  app.set_version_flag("--version", std::string("tramlined ") + tramline::kVersion);
  app.add_option("SITE", site_file, "the site file")->required();
  app.add_flag("--check", only_check, "only read the site file and report its faults");
  app.footer(
      "Exit status: 0 stopped in good order, or no faults; 2 wrong usage or site file; 3 could not run.");
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& error) {
    return app.exit(error) == 0 ? 0 : static_cast<int>(tramline::ServiceExit::wrong_input);
  }
  if (only_check) return check(site_file);
  const auto log = tramline::make_log();
  try {
    return static_cast<int>(tramline::Service(site_file, log).run());
  } catch (const std::exception& error) {
    log->critical("{}", error.what());
    return static_cast<int>(tramline::ServiceExit::could_not);
  }
}
