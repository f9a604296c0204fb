#include <CLI/CLI.hpp>
#include <exception>
#include <iostream>
#include <string>

#include "config/site_file.hpp"
#include "config/version.hpp"
#include "daemon/log.hpp"
#include "daemon/probe_run.hpp"
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
  auto* check_flag = app.add_flag("--check", only_check, "only read the site file and report its faults");
  bool only_probe = false;
  tramline::ProbeOptions probe;
  auto* probe_flag = app.add_flag("--probe", only_probe,
                                  "measure for a few seconds, say what is there and what to fix, and end")
                         ->excludes(check_flag);
  app.add_option("--seconds", probe.seconds, "how long to probe")
      ->needs(probe_flag)
      ->check(CLI::Range(1.0, 60.0))
      ->capture_default_str();
  app.add_flag("--json", probe.json, "the probe's answer for programs")->needs(probe_flag);
  app.footer(
      "Exit status: 0 stopped in good order, or no faults; 1 the probe found what must be fixed; 2 wrong\n"
      "usage or site file; 3 could not run, or the source could not be opened.");
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& error) {
    return app.exit(error) == 0 ? 0 : static_cast<int>(tramline::ServiceExit::wrong_input);
  }
  if (only_check) return check(site_file);
  const auto log = tramline::make_log();
  try {
    if (only_probe) return static_cast<int>(tramline::run_probe(site_file, probe));
    return static_cast<int>(tramline::Service(site_file, log).run());
  } catch (const std::exception& error) {
    log->critical("{}", error.what());
    return static_cast<int>(tramline::ServiceExit::could_not);
  }
}
