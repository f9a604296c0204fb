#include "tools/logged_reading.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>

#include "config/calibration_file.hpp"
#include "config/site_file.hpp"

namespace tramline::tools {
namespace {

constexpr std::int64_t kAroundNs = 6 * kNsPerSecond;

Error no_value(std::string what, std::string remedy) {
  return {"", std::move(what), std::move(remedy)};
}

}  // namespace

Result<std::optional<config::ChannelSettings>> channel_in_force(const storage::LogbookReader& reader,
                                                                Channel channel, std::optional<UtcNs> at) {
  using Found = std::optional<config::ChannelSettings>;
  const auto text = reader.settings(at);
  if (!text) return text.error();
  if (!text.value()) return Found();
  config::SiteFile file = config::parse_site(*text.value(), "site file in the logbook");
  if (!file.ok())
    return no_value("the site file kept in the logbook is not understood", "use a newer version");
  const auto calibration = reader.calibration(at);
  if (!calibration) return calibration.error();
  if (!calibration.value().empty()) {
    config::Findings findings;
    config::calibrate(*file.site, calibration.value(), "calibration in the logbook", findings);
    if (!findings.faults.empty())
      return no_value("the calibration kept in the logbook is not understood", "use a newer version");
  }
  for (const config::ChannelSettings& settings : file.site->channels) {
    if (settings.channel == channel) return Found(settings);
  }
  return Found();
}

Result<SensorReading> logged_reading(const storage::LogbookReader& reader, UtcNs at, double reference_v,
                                     double allowed_v, const config::ChannelSettings& now) {
  const auto then = channel_in_force(reader, now.channel, at);
  if (!then) return then.error();
  auto found = reader.aggregates(storage::Interval::three_seconds, {at - kAroundNs, at + kAroundNs});
  if (!found) return found.error();
  auto& values = found.value();
  std::erase_if(values, [&](const storage::Aggregate& a) { return a.channel != now.channel; });
  const bool covered = std::any_of(values.begin(), values.end(), [&](const storage::Aggregate& a) {
    return a.begin <= at && at < a.end && !std::isnan(a.u_rms_v);
  });
  if (!covered || !then.value()) {
    return no_value(
        "the logbook has no 3-s value of " + config::name_of(now.channel) + " at that time",
        "give a time at which the daemon measured; the site file says how long 3-s values are kept");
  }
  const config::ChannelSettings& was = *then.value();
  std::vector<double> shown;
  double squares = 0.0;
  for (const storage::Aggregate& a : values) {
    if (a.flagged)
      return no_value("a sag, swell or interruption falls in it", "compare while the voltage is steady");
    if (a.over_range) return no_value("the sensor stood at its limit", "compare within its range");
    if (a.partial || std::isnan(a.u_rms_v))
      return no_value("not all of it was measured", "compare while the daemon measures without a gap");
    const double volts = a.u_rms_v * std::abs(now.scale / was.scale);
    shown.push_back(volts);
    squares += volts * volts;
  }
  const auto [low, high] = std::minmax_element(shown.begin(), shown.end());
  if (*high - *low > 2.0 * allowed_v) {
    return no_value(
        fmt::format("the voltage moved from {:.2f} to {:.2f} V within 15 s, more than the reference's "
                    "uncertainty of {:.2g} V allows",
                    *low, *high, allowed_v),
        "compare while it is steady");
  }
  const auto n = static_cast<double>(shown.size());
  SensorReading reading;
  reading.reading = {config::CalibrationReading::Kind::ac, std::sqrt(squares / n), reference_v};
  if (shown.size() > 1) {
    double variance = 0.0;
    for (const double v : shown)
      variance += (v - reading.reading.shown_v) * (v - reading.reading.shown_v) / (n - 1.0) / n;
    reading.scatter_v = std::sqrt(variance);
  }
  return reading;
}

}  // namespace tramline::tools
