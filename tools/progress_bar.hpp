#pragma once

#include <chrono>
#include <string>

namespace tramline::tools {

/// How far a long piece of work has come, on one line of the terminal's error stream; silent where that is no
/// terminal.
class ProgressBar {
 public:
  explicit ProgressBar(std::string what);
  ~ProgressBar() { clear(); }
  ProgressBar(const ProgressBar&) = delete;
  ProgressBar& operator=(const ProgressBar&) = delete;

  /// `done` of the whole, 0 to 1; redraws a few times a second at most.
  void show(double done);
  /// Takes the line away again.
  void clear();

 private:
  using Clock = std::chrono::steady_clock;
  std::string what_;
  bool terminal_;
  bool drawn_ = false;
  Clock::time_point begin_ = Clock::now();
  Clock::time_point last_{};
};

}  // namespace tramline::tools
