#include "config/calibration.hpp"

#include <algorithm>
#include <cmath>

#include "config/site.hpp"
#include "config/time_text.hpp"

namespace tramline::config {

const ChannelCalibration* Calibration::of(Channel channel) const {
  const auto found = std::find_if(channels.begin(), channels.end(),
                                  [&](const ChannelCalibration& c) { return c.channel == channel; });
  return found == channels.end() ? nullptr : &*found;
}

double expanded_v_at(const ChannelCalibration& calibration, double volts) {
  return std::hypot(calibration.expanded_pct / 100.0 * volts, calibration.expanded_v);
}

bool past_due(const ChannelCalibration& calibration, UtcNs now) {
  return calibration.due && now >= *calibration.due;
}

std::vector<std::string> due_reminders(const Calibration& calibration, UtcNs now, const std::string& zone) {
  const auto day = [&](UtcNs t) { return format_in_zone(t, zone, 0).substr(0, 10); };
  std::vector<std::string> reminders;
  for (const ChannelCalibration& c : calibration.channels) {
    if (!past_due(c, now)) continue;
    reminders.push_back("the calibration of " + name_of(c.channel) + " of " + day(c.date) +
                        " was due again on " + day(*c.due));
  }
  return reminders;
}

std::string name_of(Channel channel) {
  return std::string(tramline::name_of(channel.side)) + " " + std::string(tramline::name_of(channel.phase));
}

void apply(const ChannelCalibration& calibration, ChannelSettings& settings) {
  // ((raw + offset) · scale + offset_v) · gain = (raw + offset + offset_v / scale) · (scale · gain)
  settings.offset += calibration.offset_v / settings.scale;
  settings.scale *= calibration.gain;
  if (settings.range_v > 0.0) {
    // The sensor's limit is that of its uncalibrated volts, of either sign; the nearer of the two is taken.
    settings.range_v = (settings.range_v - std::abs(calibration.offset_v)) * calibration.gain;
  }
}

}  // namespace tramline::config
