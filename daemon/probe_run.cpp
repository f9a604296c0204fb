#include "daemon/probe_run.hpp"

#include <spdlog/fmt/fmt.h>
#include <unistd.h>

#include <algorithm>
#include <cstdio>
#include <iostream>
#include <memory>
#include <thread>

#include "config/site_file.hpp"
#include "daemon/acquire/open_source.hpp"
#include "daemon/probe_findings.hpp"
#include "daemon/probe_report.hpp"

namespace tramline {
namespace {

constexpr std::chrono::milliseconds kPause(20);
constexpr std::size_t kMostFrames = 16384;

double seconds_of(std::chrono::nanoseconds ns) {
  return std::chrono::duration<double>(ns).count();
}

/// One line on the terminal's error stream; silent where that is no terminal.
class ProgressLine {
 public:
  ProgressLine() : terminal_(isatty(STDERR_FILENO) == 1) {}
  ~ProgressLine() {
    if (drawn_) std::fputs("\r\x1b[K", stderr);
  }
  ProgressLine(const ProgressLine&) = delete;
  ProgressLine& operator=(const ProgressLine&) = delete;

  void show(double done) {
    const int percent = static_cast<int>(100.0 * std::clamp(done, 0.0, 1.0));
    if (!terminal_ || percent == shown_) return;
    shown_ = percent;
    drawn_ = true;
    std::fputs(fmt::format("\rmeasuring {:3} %\x1b[K", percent).c_str(), stderr);
    std::fflush(stderr);
  }

 private:
  bool terminal_;
  bool drawn_ = false;
  int shown_ = -1;
};

}  // namespace

Result<ProbeFigures> probe_source(const config::Site& site, acquire::Source& source, const ProbePace& pace) {
  const auto began = pace.steady_now();
  for (;;) {
    const auto ready = source.ready();
    if (!ready) return ready.error();
    if (ready.value()) break;
    if (seconds_of(pace.steady_now() - began) > pace.connect_within_s)
      return Error{"source", fmt::format("it has not connected within {:g} s", pace.connect_within_s),
                   "see that the device is powered and connected, and that the site file's source names it"};
    pace.pause(kPause);
  }

  const acquire::StreamInfo& info = source.info();
  const double silence_s = std::max(pace.silence_s, 3.0 * info.readings_every_s);
  // Of a polled meter three readings at least.
  const double wanted_s = std::max(pace.seconds, 2.5 * info.readings_every_s);
  const double every_block = info.rate_hz * wanted_s;
  Probe probe(site.channels, info);
  measure::Block block;
  double last_s = seconds_of(pace.steady_now());
  bool any = false;
  while (probe.seconds() < wanted_s && !probe.full()) {
    const double left = (wanted_s - probe.seconds()) * info.rate_hz;
    const auto most = static_cast<std::size_t>(std::clamp(left + 0.5, 1.0, static_cast<double>(kMostFrames)));
    const auto more = source.next(block, std::min(most, static_cast<std::size_t>(every_block) + 1));
    if (!more) return more.error();
    if (!more.value()) break;
    const double now_s = seconds_of(pace.steady_now());
    if (block.frames() == 0) {
      if (now_s - last_s > silence_s)
        return Error{info.what, fmt::format("nothing has come for {:g} s", silence_s),
                     "see that the device is powered, connected and sending"};
      pace.pause(kPause);
      continue;
    }
    any = true;
    last_s = now_s;
    probe.take(block, now_s);
    pace.progress(probe.seconds() / wanted_s);
  }
  if (!any)
    return Error{info.what, "it ended without a sample: " + source.end_remark(),
                 "name a recording or a device that has samples"};
  return probe.figures(source.health());
}

ProbeExit run_probe(const std::string& site_file, const ProbeOptions& options) {
  const config::SiteFile file = config::read_site_file(site_file);
  std::cerr << file.fault_text() << file.remark_text();
  if (!file.ok()) return ProbeExit::wrong_input;
  const config::Site& site = *file.site;
  const auto fail = [](const Error& error) {
    std::cerr << "tramlined: " << error.text() << '\n';
    return ProbeExit::could_not;
  };

  const auto now = std::chrono::duration_cast<std::chrono::nanoseconds>(
      std::chrono::system_clock::now().time_since_epoch());
  auto opened = acquire::open_source(site, {now.count()});
  if (!opened) return fail(opened.error());
  const std::unique_ptr<acquire::Source> source = std::move(opened).value();

  std::optional<ProgressLine> line(std::in_place);
  ProbePace pace;
  pace.seconds = options.seconds;
  pace.steady_now = [] { return std::chrono::steady_clock::now().time_since_epoch(); };
  pace.pause = [](std::chrono::milliseconds time) { std::this_thread::sleep_for(time); };
  pace.progress = [&line](double done) { line->show(done); };
  const auto figures = probe_source(site, *source, pace);
  line.reset();
  if (!figures) return fail(figures.error());

  const auto findings = judged(site, figures.value());
  std::cout << (options.json ? probe_json(site, source->info(), figures.value(), findings)
                             : probe_text(site, source->info(), figures.value(), findings));
  std::cout.flush();
  const bool must = std::any_of(findings.begin(), findings.end(),
                                [](const Finding& f) { return f.severity == Severity::must_be_fixed; });
  return must ? ProbeExit::must_be_fixed : ProbeExit::fine;
}

}  // namespace tramline
