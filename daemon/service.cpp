#include "daemon/service.hpp"

#include <algorithm>
#include <cmath>
#include <csignal>
#include <sstream>
#include <variant>

#include "config/site_file.hpp"
#include "config/time_text.hpp"
#include "config/version.hpp"
#include "daemon/acquire/open_source.hpp"

namespace tramline {
namespace {

constexpr std::chrono::milliseconds kBlockEvery(40);
constexpr std::chrono::milliseconds kWaitForDisk(20);
constexpr std::size_t kMostFrames = 16384;
constexpr std::chrono::seconds kLookAtClockEvery(10);
constexpr std::chrono::hours kRemindEvery(24);
constexpr std::chrono::seconds kFirstRetry(1);
constexpr std::chrono::seconds kLongestRetry(60);
constexpr std::chrono::seconds kFirstReport(60);
constexpr std::chrono::hours kReportEvery(1);
constexpr int kMostBlocksAStep = 64;

UtcNs now() {
  return {std::chrono::duration_cast<std::chrono::nanoseconds>(
              std::chrono::system_clock::now().time_since_epoch())
              .count()};
}

/// A recording is read as fast as it goes; the simulator as its settings say; a live source as samples come.
bool runs_in_real_time(const config::Site& site, const acquire::StreamInfo& info) {
  const auto* simulator = std::get_if<config::SimulatorSettings>(&site.source);
  return info.live || (simulator != nullptr && simulator->real_time);
}

}  // namespace

Service::Service(std::string site_file, std::shared_ptr<spdlog::logger> log)
    : site_file_(std::move(site_file)),
      log_(std::move(log)),
      signals_(loop_, SIGINT, SIGTERM, SIGHUP),
      timer_(loop_),
      retry_after_(kFirstRetry) {}

ServiceExit Service::run() {
  config::SiteFile file = config::read_site_file(site_file_);
  if (!file.ok()) {
    for (const config::Fault& fault : file.faults)
      log_->error("{}", fault.text(file.file_name));
    return ServiceExit::wrong_input;
  }
  for (const config::Fault& remark : file.remarks)
    log_->warn("{}", remark.text(file.file_name));
  site_ = std::make_unique<config::Site>(std::move(*file.site));

  if (site_->logbook.path.empty()) {
    log_->error("{}: the site file names no logbook; give logbook.path", site_file_);
    return ServiceExit::wrong_input;
  }
  storage::OpenOptions options;
  options.set_aside_damaged = true;
  options.now = now();
  auto logbook = storage::LogbookWriter::open(site_->logbook.path, options);
  if (!logbook) {
    log_->error("{}", logbook.error().text());
    return ServiceExit::could_not;
  }
  for (const std::string& remark : logbook.value().opening_remarks())
    log_->warn("{}", remark);
  writer_.emplace(std::move(logbook).value(), site_->logbook, queue_,
                  [this](bool trouble, const std::string& words) {
                    if (trouble) {
                      log_->error("{}", words);
                    } else {
                      log_->info("{}", words);
                    }
                  });

  log_->info("tramlined {}: site {}, logbook {}", kVersion, site_->name, site_->logbook.path);
  await_signal();
  open_source();
  loop_.run();
  writer_.reset();
  log_->info("stopped");
  return ServiceExit::stopped;
}

void Service::open_source() {
  auto source = acquire::open_source(*site_, now());
  if (!source) {
    source_failed(source.error());
    return;
  }
  source_ = std::move(source).value();
  schedule(Clock::duration::zero());
}

void Service::begin_measuring() {
  const acquire::StreamInfo& info = source_->info();
  real_time_ = runs_in_real_time(*site_, info);
  log_->info("source: {}", info.what);
  for (const std::string& remark : info.remarks)
    log_->info("source: {}", remark);

  pipeline_ = std::make_unique<Pipeline>(*site_, info, "the daemon opened its source");
  records_.emplace_back(storage::SessionBegin{std::string("tramlined ") + kVersion, info.what, info.rate_hz,
                                              info.dated, info.begin,
                                              std::llround(info.readings_every_s * 1e9)});
  records_.emplace_back(storage::SettingsInForce{info.begin, site_->text});
  records_.emplace_back(storage::CalibrationInForce{info.begin, site_->calibration.text});
  clock_watch_.emplace(site_->clock);
  clock_trust_.reset();
  look_at_clock();
  queue_.put(records_);
  source_began_ = Clock::now();
  next_report_ = source_began_ + kFirstReport;
  frames_taken_ = 0;
}

void Service::close_source(storage::EventEnd reason, const std::string& why) {
  if (pipeline_) {
    report_health();
    pipeline_->finish(reason, why, records_);
    records_.emplace_back(storage::SessionEnd{why});
    queue_.put(records_);
  }
  pipeline_.reset();
  source_.reset();
}

void Service::look_at_clock() {
  next_look_ = Clock::now() + kLookAtClockEvery;
  remind_of_calibration();
  if (!real_time_) return;
  storage::ClockState state = clock_watch_->look(kernel_clock());
  // The samples' own time is a little worse than the clock's.
  if (state.error_bound_ns >= 0) state.error_bound_ns += source_->health().time_error_ns;
  if (clock_trust_ != state.trust) {
    const std::string words =
        (clock_trust_ ? "the clock is now " : "the clock at the start: ") + clock_words(state);
    log_->info("{}", words);
    records_.emplace_back(storage::ClockChange{now(), words, 0, state});
    clock_trust_ = state.trust;
  }
  pipeline_->clock_state(state);
}

void Service::report_health() {
  next_report_ = Clock::now() + kReportEvery;
  if (!source_->info().live) return;
  const acquire::StreamHealth health = source_->health();
  if (health.rate_hz > 0.0) {
    const double nominal_hz = source_->info().rate_hz;
    log_->info("source: true sample rate {:.3f} Hz, {:+.1f} ppm of nominal, standard uncertainty {:.1f} ppm",
               health.rate_hz, (health.rate_hz / nominal_hz - 1.0) * 1e6, health.rate_error_ppm);
  }
  log_->info("source: {} samples taken, {} lost, {} not taken in time, {} over-range, {} bytes refused",
             health.frames, health.lost_frames, health.overrun_frames, health.over_range_frames,
             health.refused_bytes);
}

void Service::remind_of_calibration() {
  if (Clock::now() < next_reminder_) return;
  next_reminder_ = Clock::now() + kRemindEvery;
  for (const std::string& reminder : config::due_reminders(site_->calibration, now(), site_->zone))
    log_->warn("{}", reminder);
}

std::size_t Service::frames_due() const {
  if (!real_time_ || source_->info().live) return kMostFrames;
  const double gone_s = std::chrono::duration<double>(Clock::now() - source_began_).count();
  const auto due = static_cast<std::int64_t>(gone_s * source_->info().rate_hz) - frames_taken_;
  return static_cast<std::size_t>(std::clamp<std::int64_t>(due, 0, kMostFrames));
}

void Service::step() {
  if (!pipeline_) {
    const auto ready = source_->ready();
    if (!ready) {
      source_failed(ready.error());
      return;
    }
    if (!ready.value()) {
      schedule(kBlockEvery);
      return;
    }
    begin_measuring();
  }
  if (!real_time_ && queue_.crowded()) {
    schedule(kWaitForDisk);
    return;
  }
  // A live source may have several pieces waiting, with gaps between them.
  const int most = source_->info().live ? kMostBlocksAStep : 1;
  for (int i = 0; i < most; ++i) {
    if (!take_block()) return;
    if (block_.frames() == 0) break;
  }
  if (real_time_ && Clock::now() >= next_report_) report_health();
  schedule(real_time_ ? Clock::duration(kBlockEvery) : Clock::duration::zero());
}

/// false: the source is closed.
bool Service::take_block() {
  const std::size_t due = frames_due();
  block_.resize(block_.channels(), 0);
  if (due == 0) return true;
  auto more = source_->next(block_, due);
  if (!more) {
    source_failed(more.error());
    return false;
  }
  if (!more.value()) {
    const std::string why = source_->end_remark();
    log_->info("the source is over: {}", why);
    close_source(storage::EventEnd::stopped, why);
    stop(why);
    return false;
  }
  if (block_.frames() == 0) return true;
  if (Clock::now() >= next_look_ ||
      (block_.anchor && block_.anchor->cause == measure::AnchorCause::clock_set))
    look_at_clock();
  frames_taken_ += static_cast<std::int64_t>(block_.frames());
  pipeline_->take(block_, records_);
  queue_.put(records_);
  retry_after_ = kFirstRetry;
  return true;
}

void Service::schedule(Clock::duration after) {
  timer_.expires_after(after);
  timer_.async_wait([this](const boost::system::error_code& error) {
    if (error || stopping_) return;
    if (source_) {
      step();
    } else {
      open_source();
    }
  });
}

void Service::source_failed(const Error& error) {
  log_->error("source: {}", error.text());
  close_source(storage::EventEnd::gap, "the source failed: " + error.what);
  log_->warn("opening the source again in {} s",
             std::chrono::duration_cast<std::chrono::seconds>(retry_after_).count());
  schedule(retry_after_);
  retry_after_ = std::min<Clock::duration>(2 * retry_after_, kLongestRetry);
}

void Service::await_signal() {
  signals_.async_wait([this](const boost::system::error_code& error, int signal) {
    if (error) return;
    if (signal == SIGHUP) {
      reread();
      await_signal();
      return;
    }
    stop(signal == SIGTERM ? "told to stop (TERM)" : "told to stop (INT)");
  });
}

void Service::reread() {
  config::SiteFile file = config::read_site_file(site_file_);
  if (!file.ok()) {
    for (const config::Fault& fault : file.faults)
      log_->error("{}", fault.text(file.file_name));
    log_->error("the site file is refused; the one in force stays");
    return;
  }
  if (file.site->logbook.path != site_->logbook.path) {
    log_->error("the site file is refused: another logbook takes a restart; the one in force stays");
    return;
  }
  log_->info("the site file is read again");
  close_source(storage::EventEnd::gap, "the site file was read again");
  site_ = std::make_unique<config::Site>(std::move(*file.site));
  retry_after_ = kFirstRetry;
  next_reminder_ = {};
  open_source();
}

void Service::stop(const std::string& why) {
  if (stopping_) return;
  stopping_ = true;
  log_->info("stopping: {}", why);
  close_source(storage::EventEnd::stopped, why);
  timer_.cancel();
  signals_.cancel();
}

}  // namespace tramline
