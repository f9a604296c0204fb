#include "config/site_sections.hpp"

#include <algorithm>
#include <array>
#include <cstddef>
#include <cstdio>
#include <string>
#include <vector>

#include "config/nearest_word.hpp"
#include "config/time_text.hpp"

namespace tramline::config {
namespace {

const Words<Side> kSides = {{"input", Side::input}, {"output", Side::output}};
const Words<Phase> kPhases = {{"L1", Phase::l1}, {"L2", Phase::l2}, {"L3", Phase::l3}};

constexpr std::size_t kLongestName = 100;
constexpr std::size_t kLongestPath = 4000;
constexpr double kLongestKeepDays = 36'500.0;

std::string volts(double v) {
  char text[32];
  std::snprintf(text, sizeof text, "%.6g V", v);
  return text;
}

void check_zone(MapReader& map, const std::string& zone) {
  if (zone_known(zone)) return;
  const std::vector<std::string> names = zone_names();
  if (names.empty()) {
    map.fault("zone", "is " + shown(zone) + ", but this machine has no time zone database",
              "install the package tzdata");
    return;
  }
  const std::string_view near = nearest_word(zone, std::vector<std::string_view>(names.begin(), names.end()));
  map.fault("zone", "is " + shown(zone),
            near.empty() ? "a zone is a name of the IANA time zone database, such as Asia/Kolkata or UTC"
                         : "did you mean " + std::string(near) + "?");
}

/// "input L1"
std::string channel_name(Channel channel) {
  return std::string(name_of(channel.side)) + " " + std::string(name_of(channel.phase));
}

}  // namespace

SoundFigures read_site_section(MapReader& map, Site& site) {
  SoundFigures sound;
  map.text("name", site.name, "a site's name", kLongestName, kRequired);
  if (map.text("zone", site.zone, "a time zone", kLongestName) && map.has("zone")) check_zone(map, site.zone);
  sound.nominal_v =
      map.number("nominal_v", site.nominal_v,
                 {"the nominal voltage, phase to neutral,", kLowestVolts, kHighestVolts, "V"}, kRequired);
  sound.nominal_hz = map.word<double>("frequency_hz", site.nominal_hz, {{"50", 50.0}, {"60", 60.0}},
                                      "the nominal frequency", kRequired);
  sound.phases = map.word<int>("phases", site.phases, {{"1", 1}, {"3", 3}}, "the number of phases");
  map.refuse_other_keys();
  // In a section that is not there nothing is missed, but nothing is known either.
  return map.is_there() ? sound : SoundFigures{};
}

void read_channels(MapReader& root, Site& site, SoundFigures sound) {
  struct Listed {
    ChannelSettings settings;
    Position at;
  };
  std::vector<Listed> listed;
  bool all_sound = true;
  root.each(
      "channels", "channels",
      [&](MapReader map) {
        ChannelSettings settings;
        bool known =
            map.word<Side>("side", settings.channel.side, kSides, "the side of a channel", kRequired);
        // With one phase there is nothing to choose; with three a phase left out would silently be L1.
        const bool one_phase = sound.phases && site.phases == 1;
        const bool phase_must_be_there = sound.phases && !one_phase;
        known &= map.word<Phase>(
            "phase", settings.channel.phase, kPhases, "the phase of a channel",
            phase_must_be_there ? kRequired : absent_means("L1 if site.phases is 1, else required"));
        const bool source_sound = map.text("source_channel", settings.source_channel,
                                           "the channel's number, from 1, or name in its source",
                                           kLongestName, absent_means("the next in order"));
        map.number("scale", settings.scale, {"the scale", -1e9, 1e9, "V for each unit of the source"});
        if (settings.scale == 0.0)
          map.fault("scale", "is 0", "a scale turns what the source gives into volts, so it is not 0");
        map.number("offset", settings.offset, {"the offset", -1e9, 1e9, "in units of the source"});
        map.number("range_v", settings.range_v, {"the limit of the sensor", 0.0, 1e9, "V"});
        map.refuse_other_keys();

        if (known && one_phase && settings.channel.phase != Phase::l1) {
          map.fault("phase", "is " + std::string(name_of(settings.channel.phase)) + " where site.phases is 1",
                    "the phase of a single-phase site is L1");
          known = false;
        }
        for (std::size_t i = 0; known && i < listed.size(); ++i) {
          if (listed[i].settings.channel != settings.channel) continue;
          map.fault_here("is " + channel_name(settings.channel) + ", listed in line " +
                             std::to_string(listed[i].at.line) + " already",
                         "each channel stands in the list once");
          known = false;
        }
        for (std::size_t i = 0; source_sound && !settings.source_channel.empty() && i < listed.size(); ++i) {
          if (listed[i].settings.source_channel != settings.source_channel) continue;
          map.fault("source_channel",
                    "is " + shown(settings.source_channel) + ", taken in line " +
                        std::to_string(listed[i].at.line) + " already",
                    "each channel has a source channel of its own");
          break;
        }
        if (source_sound && settings.source_channel == "0") {
          map.fault("source_channel", "is 0", "source channels are counted from 1");
        }
        all_sound &= known;
        if (known) listed.push_back({std::move(settings), map.at()});
      },
      kRequired);

  std::sort(listed.begin(), listed.end(),
            [](const Listed& a, const Listed& b) { return a.settings.channel < b.settings.channel; });
  for (const Listed& entry : listed)
    site.channels.push_back(entry.settings);

  if (!all_sound || !sound.phases || site.phases != 3) return;
  for (const Side side : {Side::input, Side::output}) {
    if (!site.has(side)) continue;
    std::string missing;
    for (const Phase phase : {Phase::l1, Phase::l2, Phase::l3}) {
      const bool there =
          std::any_of(site.channels.begin(), site.channels.end(), [&](const ChannelSettings& c) {
            return c.channel == Channel{side, phase};
          });
      if (!there) missing += (missing.empty() ? "" : " and ") + channel_name({side, phase});
    }
    if (!missing.empty()) {
      root.fault("channels", "lacks " + missing,
                 "a side of a three-phase site has L1, L2 and L3, or is left out altogether");
    }
  }
}

void read_events(MapReader& map, EventSettings& events) {
  const bool sag =
      map.number("sag_pct", events.sag_pct, {"a sag threshold", 1.0, 100.0, "percent of nominal_v"});
  const bool swell =
      map.number("swell_pct", events.swell_pct, {"a swell threshold", 100.0, 200.0, "percent of nominal_v"});
  const bool interruption = map.number("interruption_pct", events.interruption_pct,
                                       {"an interruption threshold", 0.5, 50.0, "percent of nominal_v"});
  const bool hysteresis = map.number("hysteresis_pct", events.hysteresis_pct,
                                     {"the hysteresis", 0.0, 10.0, "percent of nominal_v"});
  map.refuse_other_keys();

  // Reported at a key that the file holds, so that the reader finds something to change there.
  const auto written = [&](std::string_view first, std::string_view second) {
    return map.has(first) ? first : second;
  };
  if (sag && interruption && events.interruption_pct >= events.sag_pct) {
    map.fault(written("interruption_pct", "sag_pct"),
              "leaves interruption_pct (" + plain_number(events.interruption_pct) +
                  ") at or above sag_pct (" + plain_number(events.sag_pct) + ")",
              "interruption_pct lies below sag_pct: an interruption is the deepest of sags");
  }
  if (sag && swell && hysteresis &&
      events.sag_pct + events.hysteresis_pct >= events.swell_pct - events.hysteresis_pct) {
    map.fault(map.has("hysteresis_pct") ? "hysteresis_pct" : written("sag_pct", "swell_pct"),
              "leaves no normal voltage between sag_pct + hysteresis_pct (" +
                  plain_number(events.sag_pct + events.hysteresis_pct) +
                  ") and swell_pct - hysteresis_pct (" +
                  plain_number(events.swell_pct - events.hysteresis_pct) + ")",
              "the first must lie below the second");
  }
}

bool read_regulator(MapReader& map, Site& site, SoundFigures sound) {
  RegulatorSettings regulator;
  const bool target = map.number(
      "target_v", regulator.target_v,
      {"the target of a regulator, phase to neutral,", kLowestVolts, kHighestVolts, "V"}, kRequired);
  double band_pct = 0.0;
  const bool pct_sound =
      map.number("band_pct", band_pct, {"half the width of the band", 0.1, 50.0, "percent of target_v"},
                 absent_means("this or band_v"));
  const bool band_sound =
      map.range("band_v", regulator.band_low_v, regulator.band_high_v,
                {"the band", kLowestVolts, kHighestVolts, "V"}, absent_means("this or band_pct"));
  double input_low_v = 0.0;
  double input_high_v = 0.0;
  const bool input_sound =
      map.range("input_v", input_low_v, input_high_v, {"the input range", kLowestVolts, kHighestVolts, "V"},
                absent_means("this or ratio"));
  const bool ratio_sound =
      map.range("ratio", regulator.ratio_min, regulator.ratio_max,
                {"the ratio of output to input", 0.01, 100.0}, absent_means("this or input_v"));
  map.number("speed_v_per_s", regulator.speed_v_per_s,
             {"the correction speed", 0.1, 10'000.0, "V/s of output"}, absent_means("not known"));
  map.number("response_s", regulator.response_s, {"the response time", 0.0, 60.0, "s"});
  map.number("grace_s", regulator.grace_s, {"the grace", 0.0, 3600.0, "s"});
  map.number("tolerance_pct", regulator.tolerance_pct, {"the tolerance", 0.0, 5.0, "percent of nominal_v"});
  map.refuse_other_keys();

  const auto one_of_two = [&map](std::string_view first, std::string_view second, const std::string& what) {
    if (map.has(first) && map.has(second)) {
      map.fault(
          second, "stands beside " + std::string(first),
          what + " is given by " + std::string(first) + " or by " + std::string(second) + ", not by both");
      return false;
    }
    if (map.is_there() && !map.has(first) && !map.has(second)) {
      map.fault(first, "is missing",
                what + " is given by " + std::string(first) + " or by " + std::string(second));
      return false;
    }
    return true;
  };
  const bool one_band = one_of_two("band_pct", "band_v", "the band");
  const bool one_ratio = one_of_two("input_v", "ratio", "the range of the regulator");

  const bool target_outside =
      target && one_band && map.has("band_v") && band_sound &&
      (regulator.band_low_v >= regulator.target_v || regulator.band_high_v <= regulator.target_v);
  if (target_outside) {
    map.fault("band_v", "does not hold target_v (" + volts(regulator.target_v) + ") between its ends",
              "the band reaches from below target_v to above it");
  }
  if (target && sound.nominal_v &&
      (regulator.target_v < 0.5 * site.nominal_v || regulator.target_v > 1.5 * site.nominal_v)) {
    map.fault("target_v", "is " + volts(regulator.target_v) + " at a nominal_v of " + volts(site.nominal_v),
              "a target lies between 50 and 150 percent of site.nominal_v; both are phase to neutral");
  }
  if (target && one_band && pct_sound && map.has("band_pct")) {
    regulator.band_low_v = regulator.target_v * (1.0 - band_pct / 100.0);
    regulator.band_high_v = regulator.target_v * (1.0 + band_pct / 100.0);
  }
  if (target && one_ratio && input_sound && map.has("input_v")) {
    regulator.ratio_min = regulator.target_v / input_high_v;
    regulator.ratio_max = regulator.target_v / input_low_v;
  }
  const bool complete = map.is_there() && target && !target_outside && one_band && one_ratio && pct_sound &&
                        band_sound && input_sound && ratio_sound;

  if (complete && sound.nominal_v) {
    const double lowest_v = site.events.sag_pct / 100.0 * site.nominal_v;
    const double highest_v = site.events.swell_pct / 100.0 * site.nominal_v;
    if (regulator.band_low_v < lowest_v || regulator.band_high_v > highest_v) {
      map.remark(
          map.has("band_v") ? "band_v" : "band_pct",
          "reaches beyond the sag and swell thresholds (" + volts(lowest_v) + " to " + volts(highest_v) + ")",
          "an output in its band may then count as a sag or a swell");
    }
    const double lowest_output_v = regulator.ratio_min * site.nominal_v;
    const double highest_output_v = regulator.ratio_max * site.nominal_v;
    if (highest_output_v < regulator.band_low_v || lowest_output_v > regulator.band_high_v) {
      map.remark(
          map.has("ratio") ? "ratio" : "input_v",
          "makes " + volts(lowest_output_v) + " to " + volts(highest_output_v) + " of the nominal supply",
          "a regulator that fits its supply can bring nominal_v into its band");
    }
  }
  site.regulator = regulator;
  return complete;
}

void read_capture(MapReader& map, CaptureSettings& capture) {
  const bool before =
      map.number("before_ms", capture.before_ms, {"the time kept before an event", 0.0, 5000.0, "ms"});
  const bool after =
      map.number("after_ms", capture.after_ms, {"the time kept after an event", 0.0, 5000.0, "ms"});
  const bool longest =
      map.number("longest_ms", capture.longest_ms, {"the longest capture", 100.0, 10'000.0, "ms"});
  map.number("per_day_mb", capture.per_day_mb, {"the day's allowance of waveforms", 0.0, 100'000.0, "MB"});
  map.refuse_other_keys();
  if (before && after && longest && capture.longest_ms < capture.before_ms + capture.after_ms) {
    map.fault(map.has("longest_ms")  ? "longest_ms"
              : map.has("before_ms") ? "before_ms"
                                     : "after_ms",
              "leaves longest_ms (" + plain_number(capture.longest_ms) + ") below before_ms + after_ms (" +
                  plain_number(capture.before_ms + capture.after_ms) + ")",
              "a capture has room for what comes before and after its event");
  }
}

void read_logbook(MapReader& map, LogbookSettings& logbook) {
  map.text("path", logbook.path, "the path of the logbook", kLongestPath,
           absent_means("given when the program is started"));
  map.number("size_budget_mb", logbook.size_budget_mb, {"the size budget", 1.0, 1'000'000.0, "MB"});
  map.number("keep_three_seconds_days", logbook.keep_three_seconds_days,
             {"the time 3-s values are kept", 0.0, kLongestKeepDays, "days"});
  map.number("keep_ten_seconds_days", logbook.keep_ten_seconds_days,
             {"the time 10-s frequencies are kept", 0.0, kLongestKeepDays, "days"});
  map.number("keep_waveforms_days", logbook.keep_waveforms_days,
             {"the time waveforms are kept", 0.0, kLongestKeepDays, "days"});
  map.number("keep_corrections_days", logbook.keep_corrections_days,
             {"the time corrections are kept", 0.0, kLongestKeepDays, "days"});
  map.refuse_other_keys();
}

void read_clock(MapReader& map, ClockSettings& clock) {
  map.number("stated_error_ms", clock.stated_error_ms, {"the stated error of the clock", 0.001, 1000.0, "ms"},
             absent_means("the kernel's word"));
  map.refuse_other_keys();
}

}  // namespace tramline::config
