#include "daemon/log.hpp"

#include <spdlog/pattern_formatter.h>
#include <spdlog/sinks/stdout_sinks.h>
#include <spdlog/spdlog.h>

#include <cstdlib>
#include <utility>

namespace tramline {
namespace {

/// The level as journald's priority, after sd-daemon(3).
class Priority : public spdlog::custom_flag_formatter {
 public:
  void format(const spdlog::details::log_msg& message, const std::tm&, spdlog::memory_buf_t& out) override {
    const char digit = message.level >= spdlog::level::critical ? '2'
                       : message.level == spdlog::level::err    ? '3'
                       : message.level == spdlog::level::warn   ? '4'
                       : message.level == spdlog::level::info   ? '6'
                                                                : '7';
    const char text[] = {'<', digit, '>'};
    out.append(text, text + sizeof text);
  }
  [[nodiscard]] std::unique_ptr<custom_flag_formatter> clone() const override {
    return std::make_unique<Priority>();
  }
};

}  // namespace

std::shared_ptr<spdlog::logger> make_log() {
  auto sink = std::make_shared<spdlog::sinks::stderr_sink_mt>();
  auto log = std::make_shared<spdlog::logger>("tramlined", std::move(sink));
  auto formatter = std::make_unique<spdlog::pattern_formatter>();
  if (std::getenv("JOURNAL_STREAM") != nullptr) {
    formatter->add_flag<Priority>('*').set_pattern("%*%v");
  } else {
    formatter->set_pattern("%Y-%m-%dT%H:%M:%S.%e%z %l: %v");
  }
  log->set_formatter(std::move(formatter));
  return log;
}

}  // namespace tramline
