#include <fstream>
#include <iostream>
#include <memory>

#include "tools/commands.hpp"
#include "tools/logbook_view.hpp"
#include "tools/question.hpp"
#include "tools/wave_plot.hpp"

namespace tramline::tools {
namespace {

struct Request {
  std::string logbook;
  std::int64_t event = 0;
  std::string file;
  bool csv = false;
  bool end = false;
};

ExitStatus wave(const Request& request) {
  auto view = open_view(request.logbook, "", "");
  if (!view) return tell(view.error(), ExitStatus::wrong_usage);
  auto row = view.value().event(request.event);
  if (!row) return tell(row.error(), ExitStatus::wrong_usage);
  auto waveform = view.value().waveform_of(row.value(), request.end);
  if (!waveform) return tell(waveform.error(), ExitStatus::could_not);

  const config::Site& site = view.value().site();
  const std::string drawn = request.csv ? wave_csv(waveform.value(), row.value().event, site)
                                        : wave_svg(waveform.value(), row.value().event, site,
                                                   !view.value().dated(row.value().session));
  if (request.file.empty()) {
    std::cout << drawn;
    return ExitStatus::answered;
  }
  std::ofstream file(request.file, std::ios::binary);
  file << drawn;
  if (!file.flush())
    return tell({request.file, "the file cannot be written", "choose another with -o"},
                ExitStatus::could_not);
  return ExitStatus::answered;
}

}  // namespace

void add_wave(CLI::App& app, ExitStatus& status) {
  CLI::App* command =
      app.add_subcommand("wave", "Draw the waveform around an event, with its half-cycle r.m.s., as SVG.");
  auto request = std::make_shared<Request>();
  command->add_option("LOGBOOK", request->logbook, "the logbook file")->required();
  command->add_option("EVENT", request->event, "the event's number, as `tramline events` gives it")
      ->required();
  command->add_option("-o,--output", request->file, "write to this file, not to the standard output");
  command->add_flag("--csv", request->csv, "samples and half-cycle values as CSV");
  command->add_flag("--end", request->end, "of a long event, the waveform around its end");
  command->callback([request, &status] { status = wave(*request); });
}

}  // namespace tramline::tools
