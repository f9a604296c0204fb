/// Opens the source that a site file names and tells what comes, as JSON, for tests of live sources in
/// Python.
///
/// Usage: take_live SITE-FILE FRAMES
///
/// Ends with 0 when FRAMES frames have come, with 1 if the source failed; both say what came until then.
#include <chrono>
#include <cmath>
#include <cstdlib>
#include <iostream>
#include <nlohmann/json.hpp>
#include <thread>
#include <vector>

#include "config/site_file.hpp"
#include "daemon/acquire/open_source.hpp"

namespace {

using nlohmann::json;
using namespace tramline;

constexpr std::chrono::milliseconds kPause(5);

json failed(const Error& error) {
  return {{"where", error.where}, {"what", error.what}, {"remedy", error.remedy}};
}

json taken_from(acquire::Source& source, std::size_t frames) {
  json taken = {{"gaps", json::array()}, {"over_range", json::array()}, {"error", nullptr}, {"frames", 0}};
  for (;;) {
    const auto ready = source.ready();
    if (!ready) {
      taken["error"] = failed(ready.error());
      return taken;
    }
    if (ready.value()) break;
    std::this_thread::sleep_for(kPause);
  }
  taken["what"] = source.info().what;
  taken["rate_hz"] = source.info().rate_hz;
  taken["remarks"] = source.info().remarks;
  measure::Block block;
  std::size_t came = 0;
  std::int64_t next = 0;
  std::vector<double> sums;
  std::vector<double> squares;
  json firsts = json::array();
  while (came < frames) {
    const auto more = source.next(block, frames - came);
    if (!more) {
      taken["error"] = failed(more.error());
      break;
    }
    if (block.frames() == 0) {
      std::this_thread::sleep_for(kPause);
      continue;
    }
    sums.resize(block.channels());
    squares.resize(block.channels());
    if (block.first.value > next) {
      taken["gaps"].push_back({{"at", next},
                               {"missing", block.first.value - next},
                               {"overrun", block.gap == measure::GapCause::overrun}});
    }
    next = block.first.value + static_cast<std::int64_t>(block.frames());
    for (const auto& span : block.over_range) {
      for (std::size_t i = 0; i < span.frames; ++i) {
        taken["over_range"].push_back(
            {span.channel, block.first.value + static_cast<std::int64_t>(span.first_frame + i)});
      }
    }
    for (std::size_t c = 0; c < block.channels(); ++c) {
      if (came == 0) firsts.push_back(block.channel(c)[0]);
      for (const float volts : block.channel(c)) {
        sums[c] += volts;
        squares[c] += static_cast<double>(volts) * volts;
      }
    }
    came += block.frames();
  }
  json means = json::array();
  json rms = json::array();
  for (std::size_t c = 0; c < sums.size(); ++c) {
    means.push_back(sums[c] / static_cast<double>(came));
    rms.push_back(std::sqrt(squares[c] / static_cast<double>(came)));
  }
  taken["frames"] = came;
  taken["first_v"] = firsts;
  taken["mean_v"] = means;
  taken["rms_v"] = rms;
  const acquire::StreamHealth health = source.health();
  taken["lost_frames"] = health.lost_frames;
  return taken;
}

}  // namespace

int main(int count, char** arguments) {
  if (count != 3) return 2;
  const config::SiteFile file = config::read_site_file(arguments[1]);
  if (!file.ok()) {
    for (const auto& fault : file.faults)
      std::cerr << fault.text(file.file_name) << '\n';
    return 2;
  }
  auto source = acquire::open_source(*file.site, {0});
  const json taken = source ? taken_from(*source.value(), std::strtoull(arguments[2], nullptr, 10))
                            : json{{"error", failed(source.error())}};
  std::cout << taken.dump() << '\n';
  return taken["error"].is_null() ? 0 : 1;
}
