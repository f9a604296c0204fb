#include "tools/progress_bar.hpp"

#include <spdlog/fmt/fmt.h>
#include <unistd.h>

#include <algorithm>
#include <cstdio>
#include <utility>

#include "config/time_text.hpp"

namespace tramline::tools {

ProgressBar::ProgressBar(std::string what) : what_(std::move(what)), terminal_(isatty(STDERR_FILENO) == 1) {}

void ProgressBar::show(double done) {
  const Clock::time_point now = Clock::now();
  if (!terminal_ || now - last_ < std::chrono::milliseconds(150)) return;
  last_ = now;
  done = std::clamp(done, 0.0, 1.0);
  constexpr int kWidth = 30;
  const int full = static_cast<int>(done * kWidth);
  std::string line = "\r" + what_ + "  " + std::string(static_cast<std::size_t>(full), '=') +
                     std::string(static_cast<std::size_t>(kWidth - full), '.') +
                     fmt::format(" {:3.0f} %", 100.0 * done);
  const double gone_s = std::chrono::duration<double>(now - begin_).count();
  if (done > 0.02 && gone_s > 1.0) {
    const auto left_ns = static_cast<std::int64_t>(gone_s * (1.0 - done) / done) * 1'000'000'000;
    line += ", about " + config::format_duration(left_ns) + " left";
  }
  line += "\x1b[K";
  std::fputs(line.c_str(), stderr);
  std::fflush(stderr);
  drawn_ = true;
}

void ProgressBar::clear() {
  if (drawn_) std::fputs("\r\x1b[K", stderr);
  drawn_ = false;
}

}  // namespace tramline::tools
