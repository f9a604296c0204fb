#include "config/calibration_file.hpp"

#include <algorithm>
#include <charconv>
#include <cmath>
#include <filesystem>
#include <utility>

#include "config/site_sections.hpp"
#include "config/time_text.hpp"
#include "config/yaml_tree.hpp"

namespace tramline::config {
namespace {

const Words<Side> kSides = {{"input", Side::input}, {"output", Side::output}};
const Words<Phase> kPhases = {{"L1", Phase::l1}, {"L2", Phase::l2}, {"L3", Phase::l3}};
const Words<CalibrationReading::Kind> kKinds = {{"ac", CalibrationReading::Kind::ac},
                                                {"dc", CalibrationReading::Kind::dc}};

constexpr std::size_t kLongestText = 300;
constexpr double kLargestFigure = 1e9;  // of the site file's scale and offset
const NumberRule kPercentRule{"an expanded uncertainty", 0.0, 20.0, "percent of the voltage"};
const NumberRule kVoltsRule{"an expanded uncertainty", 0.0, 10'000.0, "V"};
const NumberRule kFactorRule{"a coverage factor", 1.0, 5.0};

void read_readings(MapReader& map, std::vector<CalibrationReading>& readings) {
  map.each("readings", "readings", [&](MapReader item) {
    CalibrationReading reading;
    item.word<CalibrationReading::Kind>("kind", reading.kind, kKinds, "the kind of a reading");
    const NumberRule rule{"a voltage", -kHighestVolts, kHighestVolts, "V"};
    item.number("shown_v", reading.shown_v, rule, kRequired);
    item.number("reference_v", reading.reference_v, rule, kRequired);
    item.refuse_other_keys();
    readings.push_back(reading);
  });
  if (readings.size() > kMostReadings) {
    map.fault("readings", "is a list of " + std::to_string(readings.size()),
              "at most " + std::to_string(kMostReadings) + " readings are kept");
  }
}

void check(MapReader& map, const ChannelCalibration& c) {
  if (c.site_scale == 0.0)
    map.fault("site_scale", "is 0", "it is the scale in the site file, which is not 0");
  if (c.due && *c.due <= c.date) {
    map.fault("due", "is not after date", "a calibration is due again after it was made");
  }
  if (c.reference_date && *c.reference_date > c.date) {
    map.fault("reference_date", "is after date", "the reference was calibrated before it was compared with");
  }
  if (map.has("expanded_pct") && map.has("expanded_v") && c.expanded_pct == 0.0 && c.expanded_v == 0.0) {
    map.fault("expanded_pct", "is 0, and so is expanded_v", "no calibration is without uncertainty");
  }
}

ChannelCalibration read_channel(MapReader& map) {
  ChannelCalibration c;
  map.word<Side>("side", c.channel.side, kSides, "the side of a channel", kRequired);
  map.word<Phase>("phase", c.channel.phase, kPhases, "the phase of a channel", kRequired);
  std::optional<UtcNs> date;
  const bool date_sound = map.instant("date", date, kRequired);
  if (date) c.date = *date;
  map.number("site_scale", c.site_scale, {"the scale in the site file", -kLargestFigure, kLargestFigure},
             kRequired);
  map.number("site_offset", c.site_offset, {"the offset in the site file", -kLargestFigure, kLargestFigure});
  map.number("gain", c.gain, {"a gain", kLowestGain, kHighestGain}, kRequired);
  map.number("offset_v", c.offset_v, {"an offset", -kHighestVolts, kHighestVolts, "V"});
  map.number("expanded_pct", c.expanded_pct, kPercentRule, kRequired);
  map.number("expanded_v", c.expanded_v, kVoltsRule, kRequired);
  map.number("k", c.k, kFactorRule);
  map.number("offset_expanded_v", c.offset_expanded_v, kVoltsRule, absent_means("not determined"));
  map.text("reference", c.reference, "what the reference is", kLongestText, kRequired);
  map.number("reference_expanded_pct", c.reference_expanded_pct, kPercentRule);
  map.number("reference_expanded_v", c.reference_expanded_v, kVoltsRule);
  map.number("reference_k", c.reference_k, kFactorRule);
  map.instant("reference_date", c.reference_date, absent_means("not known"));
  map.instant("due", c.due, absent_means("not set"));
  map.number("temperature_c", c.temperature_c, {"a temperature", -60.0, 100.0, "°C"},
             absent_means("not known"));
  map.number("temperature_coefficient_ppm_per_k", c.temperature_coefficient_ppm_per_k,
             {"a temperature coefficient", 0.0, 10'000.0, "ppm/K"}, absent_means("not known"));
  map.number("temperature_span_k", c.temperature_span_k, {"a temperature span", 0.0, 100.0, "K"},
             absent_means("not known"));
  map.text("note", c.note, "a note", kLongestText, absent_means("none"));
  read_readings(map, c.readings);
  map.refuse_other_keys();
  if (map.is_there() && date_sound) check(map, c);
  return c;
}

/// An entry with its place in the file.
struct Entry {
  ChannelCalibration calibration;
  Position at;
};

std::vector<Entry> read_entries(MapReader& root) {
  std::vector<Entry> entries;
  root.each(
      "calibrations", "calibrations",
      [&](MapReader map) {
        Entry entry{read_channel(map), map.at()};
        const auto same = std::find_if(entries.begin(), entries.end(), [&](const Entry& e) {
          return e.calibration.channel == entry.calibration.channel;
        });
        if (same != entries.end() && map.has("side")) {
          map.fault_here("is " + name_of(entry.calibration.channel) + ", which stands in line " +
                             std::to_string(same->at.line) + " already",
                         "each channel has one calibration in force");
        }
        entries.push_back(std::move(entry));
      },
      kRequired);
  root.refuse_other_keys();
  return entries;
}

/// `check` is given the entries if they are sound.
template <class Check>
Calibration read(std::string_view text, const std::string& file_name, Findings& findings, Check check) {
  Findings own;
  std::vector<Entry> entries;
  if (const std::optional<YamlNode> tree = read_yaml(text, own)) {
    if (tree->kind == YamlNode::Kind::null) {
      own.fault(tree->at, "", "the file holds no calibration",
                "it needs the list calibrations; or remove the file");
    } else {
      MapReader root(*tree, "", own);
      if (root.is_there()) entries = read_entries(root);
    }
  }
  if (own.faults.empty()) check(entries, own);
  count_characters(text, own.faults);
  for (Fault& fault : own.faults) {
    fault.file = file_name;
    findings.faults.push_back(std::move(fault));
  }
  Calibration calibration;
  calibration.text = text;
  for (Entry& entry : entries)
    calibration.channels.push_back(std::move(entry.calibration));
  std::sort(calibration.channels.begin(), calibration.channels.end(),
            [](const ChannelCalibration& a, const ChannelCalibration& b) { return a.channel < b.channel; });
  return calibration;
}

/// The shortest decimals that read back as the same double.
std::string number_text(double x) {
  char text[64];
  const auto [end, error] = std::to_chars(text, text + sizeof text, x);
  return error == std::errc{} ? std::string(text, end) : std::string("0");
}

std::string in_quotes(std::string_view text) {
  std::string out = "\"";
  for (const char c : text) {
    if (c == '"' || c == '\\') out += '\\';
    out += c;
  }
  return out + '"';
}

std::string time_text(UtcNs t) {
  // As short as it goes without losing a nanosecond.
  return format_utc(t, t.value % kNsPerSecond == 0 ? 0 : 9);
}

}  // namespace

std::string calibration_path(const std::string& site_path) {
  std::filesystem::path path(site_path);
  if (path.extension() == ".yaml" || path.extension() == ".yml") path.replace_extension();
  return path.string() + ".calibration.yaml";
}

Calibration parse_calibration(std::string_view text, const std::string& file_name, Findings& findings) {
  return read(text, file_name, findings, [](const std::vector<Entry>&, Findings&) {});
}

void calibrate(Site& site, std::string_view text, const std::string& file_name, Findings& findings) {
  const auto check = [&](const std::vector<Entry>& entries, Findings& own) {
    for (const auto& [c, at] : entries) {
      const Channel channel = c.channel;
      const auto settings = std::find_if(site.channels.begin(), site.channels.end(),
                                         [&](const ChannelSettings& s) { return s.channel == channel; });
      if (settings == site.channels.end()) {
        own.fault(at, "", "this calibrates " + name_of(channel) + ", which is no channel of the site",
                  "take this entry out, or add the channel to the site file");
      } else if (settings->scale != c.site_scale || settings->offset != c.site_offset) {
        own.fault(at, "",
                  "the calibration of " + name_of(channel) + " was made with scale " +
                      number_text(c.site_scale) + " and offset " + number_text(c.site_offset) +
                      ", but the site file now has " + number_text(settings->scale) + " and " +
                      number_text(settings->offset),
                  "it holds no more: put the site file's figures back, or take this entry out and calibrate "
                  "again");
      } else if (settings->range_v > 0.0 && std::abs(c.offset_v) >= settings->range_v) {
        own.fault(at, "", "the offset of " + name_of(channel) + " is as large as the range_v of its sensor",
                  "an offset is a small part of the range");
      }
    }
  };
  const std::size_t before = findings.faults.size();
  Calibration calibration = read(text, file_name, findings, check);
  if (findings.faults.size() > before) return;
  for (ChannelSettings& settings : site.channels) {
    if (const ChannelCalibration* c = calibration.of(settings.channel)) apply(*c, settings);
  }
  site.calibration = std::move(calibration);
}

std::string calibration_text(const std::vector<ChannelCalibration>& channels) {
  std::string out =
      "# Written by `tramline calibrate`, which replaces entries and keeps no comments; the key note is "
      "kept.\n"
      "# volts = ((raw + site_offset) * site_scale + offset_v) * gain\n"
      "calibrations:\n";
  for (const ChannelCalibration& c : channels) {
    const auto line = [&](std::string_view key, const std::string& value) {
      out.append("    ").append(key).append(": ").append(value).append("\n");
    };
    const auto number = [&](std::string_view key, double x) { line(key, number_text(x)); };
    const auto number_if = [&](std::string_view key, const std::optional<double>& x) {
      if (x) number(key, *x);
    };
    out += "  - side: " + std::string(tramline::name_of(c.channel.side)) + "\n";
    line("phase", std::string(tramline::name_of(c.channel.phase)));
    line("date", time_text(c.date));
    number("site_scale", c.site_scale);
    number("site_offset", c.site_offset);
    number("gain", c.gain);
    number("offset_v", c.offset_v);
    number("expanded_pct", c.expanded_pct);
    number("expanded_v", c.expanded_v);
    number("k", c.k);
    number_if("offset_expanded_v", c.offset_expanded_v);
    line("reference", in_quotes(c.reference));
    number("reference_expanded_pct", c.reference_expanded_pct);
    number("reference_expanded_v", c.reference_expanded_v);
    number("reference_k", c.reference_k);
    if (c.reference_date) line("reference_date", time_text(*c.reference_date));
    if (c.due) line("due", time_text(*c.due));
    number_if("temperature_c", c.temperature_c);
    number_if("temperature_coefficient_ppm_per_k", c.temperature_coefficient_ppm_per_k);
    number_if("temperature_span_k", c.temperature_span_k);
    if (!c.note.empty()) line("note", in_quotes(c.note));
    if (c.readings.empty()) continue;
    out += "    readings:\n";
    for (const CalibrationReading& r : c.readings) {
      out += std::string("      - {kind: ") + (r.kind == CalibrationReading::Kind::ac ? "ac" : "dc") +
             ", shown_v: " + number_text(r.shown_v) + ", reference_v: " + number_text(r.reference_v) + "}\n";
    }
  }
  return out;
}

std::vector<KeyDescription> calibration_file_keys() {
  Findings nothing_found;
  std::vector<KeyDescription> keys;
  MapReader root = MapReader::describing("", nothing_found, keys);
  read_entries(root);
  return keys;
}

}  // namespace tramline::config
