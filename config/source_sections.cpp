#include "config/source_sections.hpp"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <cstddef>
#include <optional>
#include <string>
#include <string_view>
#include <system_error>
#include <utility>
#include <vector>

#include "config/live_sections.hpp"
#include "config/time_text.hpp"

namespace tramline::config {
namespace {

using What = ScriptedHappening::What;

// With a begin up to 2199 the last sample stays within the range of UtcNs.
constexpr double kLongestRunS = 3660.0 * 86'400.0;
constexpr int kHighestOrder = 50;
const NumberRule kHarmonicRule{"a harmonic", 0.0, 50.0, "percent of the fundamental"};
const NumberRule kServoRatioRule{"the ratio of output to input", 0.01, 100.0};

std::string duration_text(double s) {
  return format_duration(std::llround(s * 1e9));
}

/// Which keys a line of the script has, beside `at` and `what`.
struct HappeningKeys {
  std::string_view name;
  What what;
  std::vector<std::string_view> needed;
  std::vector<std::string_view> optional;
};
const std::array<HappeningKeys, 11> kHappenings = {{
    {"sag", What::sag, {"to_pct", "lasting"}, {"phase_deg", "phases"}},
    {"swell", What::swell, {"to_pct", "lasting"}, {"phase_deg", "phases"}},
    {"interruption", What::interruption, {"lasting"}, {"phase_deg", "phases"}},
    {"level", What::level, {"to_v", "lasting"}, {"ramp", "phases"}},
    {"servo_stuck", What::servo_stuck, {}, {"lasting", "phases"}},
    {"servo_stuck_at", What::servo_stuck_at, {"ratio"}, {"lasting", "phases"}},
    {"servo_slow", What::servo_slow, {"factor"}, {"lasting", "phases"}},
    {"servo_reversed", What::servo_reversed, {}, {"lasting", "phases"}},
    {"servo_hunting", What::servo_hunting, {"factor"}, {"lasting", "phases"}},
    {"output_open", What::output_open, {}, {"lasting", "phases"}},
    {"load_step", What::load_step, {"to_a"}, {"lasting", "phases"}},
}};

bool among(std::string_view key, const std::vector<std::string_view>& keys) {
  return std::find(keys.begin(), keys.end(), key) != keys.end();
}

void read_phases(MapReader& map, const Site& site, SoundFigures sound, std::vector<Phase>& phases) {
  const std::string allowed = "phases are L1, L2 and L3, one or a list, each once";
  for (const YamlNode* node : map.scalars("phases", allowed, {"", "", "all", "L1, L2, L3"})) {
    std::optional<Phase> phase;
    for (const Phase candidate : {Phase::l1, Phase::l2, Phase::l3}) {
      if (node->kind == YamlNode::Kind::scalar && node->text == name_of(candidate)) phase = candidate;
    }
    if (!phase || std::find(phases.begin(), phases.end(), *phase) != phases.end()) {
      map.fault_at(node->at, map.path("phases"),
                   node->kind == YamlNode::Kind::scalar
                       ? "holds " + shown(node->text) + (phase ? " twice" : "")
                       : "holds what is no phase",
                   allowed);
    } else if (sound.phases && site.phases == 1 && *phase != Phase::l1) {
      map.fault_at(node->at, map.path("phases"), "holds " + shown(node->text) + " where site.phases is 1",
                   "the phase of a single-phase site is L1");
    } else {
      phases.push_back(*phase);
    }
  }
  std::sort(phases.begin(), phases.end());
}

/// Checks of a line against its `what`; the values are sound in themselves.
void check_happening(MapReader& map, const HappeningKeys& keys, const ScriptedHappening& happening,
                     const Site& site) {
  std::string takes;
  for (const auto& list : {keys.needed, keys.optional}) {
    for (const std::string_view key : list)
      takes += (takes.empty() ? "" : ", ") + std::string(key);
  }
  const std::string name(keys.name);
  constexpr std::array<std::string_view, 9> kFigures = {"lasting", "to_pct", "to_v",      "to_a",  "ramp",
                                                        "ratio",   "factor", "phase_deg", "phases"};
  for (const std::string_view key : kFigures) {
    if (map.has(key) && !among(key, keys.needed) && !among(key, keys.optional)) {
      map.fault(key, "has no meaning for " + name, name + " takes " + takes);
    } else if (!map.has(key) && among(key, keys.needed)) {
      map.fault(key, "is missing", name + " needs it");
    }
  }
  if (happening.what == What::sag && map.has("to_pct") && happening.to_pct >= 100.0) {
    map.fault("to_pct", "is " + plain_number(happening.to_pct), "a sag goes below 100 percent");
  }
  if (happening.what == What::swell && map.has("to_pct") && happening.to_pct <= 100.0) {
    map.fault("to_pct", "is " + plain_number(happening.to_pct), "a swell goes above 100 percent");
  }
  if (happening.what == What::servo_slow && map.has("factor") && happening.factor >= 1.0) {
    map.fault("factor", "is " + plain_number(happening.factor), "a slow servo has a factor below 1");
  }
  if (happening.what == What::servo_hunting && map.has("factor") && happening.factor <= 1.0) {
    map.fault("factor", "is " + plain_number(happening.factor), "a hunting servo has a factor above 1");
  }
  if (among("lasting", keys.needed) && map.has("lasting") && happening.lasting_s <= 0.0) {
    map.fault("lasting", "is 0", name + " lasts longer than that");
  }
  const bool of_the_supply = among(keys.name, {"sag", "swell", "interruption", "level"});
  if (!of_the_supply && !site.regulator) {
    map.fault("what", "is " + name + " at a site without a regulator",
              "describe the section regulator, or leave this line out");
  }
}

/// Sorted by begin; what the file has at the same instant keeps the file's order.
void read_script(MapReader& simulator, const Site& site, SoundFigures sound, SimulatorSettings& settings,
                 bool run_for_sound) {
  Words<What> words;
  for (const HappeningKeys& keys : kHappenings)
    words.emplace_back(keys.name, keys.what);
  simulator.each("script", "the script", [&](MapReader map) {
    ScriptedHappening happening;
    const bool at_sound =
        map.duration("at", happening.at_s,
                     {"the begin, counted from the begin of the simulation,", 0.0, kLongestRunS}, kRequired);
    const bool what_known = map.word<What>("what", happening.what, words, "what happens", kRequired);
    bool figures_sound = map.duration("lasting", happening.lasting_s, {"the duration", 0.0, kLongestRunS},
                                      absent_means("until the end"));
    figures_sound &=
        map.number("to_pct", happening.to_pct, {"the voltage", 0.0, 300.0, "percent of what it was"},
                   absent_means("see below"));
    figures_sound &= map.number("to_v", happening.to_v, {"the voltage", 0.0, kHighestVolts, "V"},
                                absent_means("see below"));
    figures_sound &= map.number("to_a", happening.to_a, {"the load current", 0.0, 10'000.0, "A"},
                                absent_means("see below"));
    figures_sound &= map.duration("ramp", happening.ramp_s, {"the ramp", 0.0, 86'400.0});
    figures_sound &= map.number("ratio", happening.ratio, kServoRatioRule, absent_means("see below"));
    figures_sound &=
        map.number("factor", happening.factor, {"the factor", 0.001, 1000.0}, absent_means("see below"));
    figures_sound &=
        map.number("phase_deg", happening.phase_deg, {"the point on wave", 0.0, 360.0, "degrees"});
    read_phases(map, site, sound, happening.phases);
    map.refuse_other_keys();
    if (what_known && figures_sound && map.has("what")) {
      const auto keys = std::find_if(kHappenings.begin(), kHappenings.end(),
                                     [&](const HappeningKeys& k) { return k.what == happening.what; });
      check_happening(map, *keys, happening, site);
    }
    if (at_sound && run_for_sound && settings.run_for_s > 0.0 && happening.at_s >= settings.run_for_s) {
      map.remark(
          "at",
          "lies at or after the end of the simulation (run_for is " + duration_text(settings.run_for_s) + ")",
          "it will not happen");
    }
    settings.script.push_back(std::move(happening));
  });
  std::stable_sort(settings.script.begin(), settings.script.end(),
                   [](const ScriptedHappening& a, const ScriptedHappening& b) { return a.at_s < b.at_s; });
}

std::string harmonics_text(const std::map<int, double>& harmonics) {
  std::string text;
  for (const auto& [order, pct] : harmonics) {
    text += (text.empty() ? "" : ", ") + std::to_string(order) + ": " + plain_number(pct);
  }
  return "{" + text + "}";
}

void read_harmonics(MapReader& map, const Site& site, SoundFigures sound, double rate_hz, bool rate_sound,
                    GridSettings& grid) {
  const std::string orders = "orders are whole numbers between 2 and " + std::to_string(kHighestOrder);
  const YamlNode* node =
      map.free_map("harmonics_pct", "harmonics are written as {order: percent, ...}; " + orders,
                   {"", std::string(kHarmonicRule.unit), harmonics_text(grid.harmonics_pct),
                    "orders 2 to " + std::to_string(kHighestOrder) + ", each " +
                        plain_number(kHarmonicRule.low) + " to " + plain_number(kHarmonicRule.high)});
  if (node == nullptr) return;
  grid.harmonics_pct.clear();  // the file's harmonics are all there are
  for (std::size_t i = 0; i < node->keys.size(); ++i) {
    const YamlNode::Key& key = node->keys[i];
    const std::string path = map.path("harmonics_pct") + "." + shown(key.name);
    int order = 0;
    const char* const end = key.name.data() + key.name.size();
    const auto [stop, error] = std::from_chars(key.name.data(), end, order);
    if (error != std::errc{} || stop != end || order < 2 || order > kHighestOrder) {
      map.fault_at(key.at, path, "is not the order of a harmonic", orders);
      continue;
    }
    const auto pct = map.number_at(node->items[i], path, kHarmonicRule);
    if (pct && !grid.harmonics_pct.emplace(order, *pct).second) {
      map.fault_at(key.at, path, "stands here again", "give each order once");
    }
    if (rate_sound && sound.nominal_hz && order * site.nominal_hz >= rate_hz / 2.0) {
      map.fault_at(key.at, path, "lies at or above half the sample rate of " + plain_number(rate_hz) + " Hz",
                   "leave the order out or raise rate_hz");
    }
  }
}

void read_grid(MapReader map, const Site& site, SoundFigures sound, double rate_hz, bool rate_sound,
               GridSettings& grid) {
  map.number("voltage_v", grid.voltage_v, {"the supply voltage", kLowestVolts, kHighestVolts, "V"},
             absent_means("site.nominal_v"));
  map.number("wander_pct", grid.wander_pct, {"the wander of the supply", 0.0, 50.0, "percent of voltage_v"});
  map.number("noise_v", grid.noise_v, {"the noise of the supply", 0.0, 1000.0, "V"});
  map.number("frequency_drift_hz", grid.frequency_drift_hz, {"the wander of the frequency", 0.0, 5.0, "Hz"});
  map.number("sensor_noise_v", grid.sensor_noise_v, {"the noise of a sensor", 0.0, 1000.0, "V"});
  read_harmonics(map, site, sound, rate_hz, rate_sound, grid);
  map.refuse_other_keys();
}

void read_servo(MapReader map, const Site& site, SoundFigures sound, ServoSettings& servo) {
  const bool target_sound =
      map.number("target_v", servo.target_v, {"the target", kLowestVolts, kHighestVolts, "V"},
                 absent_means("regulator.target_v"));
  const bool window_sound = map.range("comparator_v", servo.comparator_low_v, servo.comparator_high_v,
                                      {"the comparator's window", kLowestVolts, kHighestVolts, "V"},
                                      absent_means("the regulator's band"));
  map.range("ratio", servo.ratio_min, servo.ratio_max, kServoRatioRule,
            absent_means("the regulator's range"));
  map.number("speed_v_per_s", servo.speed_v_per_s, {"the correction speed", 0.1, 10'000.0, "V/s of output"});
  map.number("sense_filter_s", servo.sense_filter_s,
             {"the time constant of the sensing filter", 0.001, 60.0, "s"});
  map.number("coast_s", servo.coast_s, {"the time the motor coasts", 0.0, 60.0, "s"});
  map.number("output_impedance_ohm", servo.output_impedance_ohm,
             {"the output impedance", 0.0, 1000.0, "ohm"});
  map.number("load_a", servo.load_a, {"the load current", 0.0, 10'000.0, "A"});
  map.number("load_step_a", servo.load_step_a, {"the size of load steps", 0.0, 10'000.0, "A"});
  map.number("load_step_every_s", servo.load_step_every_s,
             {"the mean time between load steps", 0.1, 1'000'000.0, "s"});
  map.refuse_other_keys();
  if (map.is_there() && !site.regulator) {
    map.fault_here("describes a servo at a site without a regulator",
                   "describe the section regulator, or leave this one out");
  }
  if (!map.is_there() || !sound.regulator || !target_sound || !window_sound) return;
  // What the simulator will take for what is left out.
  const double target_v = map.has("target_v") ? servo.target_v : site.regulator->target_v;
  const double low_v = map.has("comparator_v") ? servo.comparator_low_v : site.regulator->band_low_v;
  const double high_v = map.has("comparator_v") ? servo.comparator_high_v : site.regulator->band_high_v;
  if (target_v <= low_v || target_v >= high_v) {
    map.fault(map.has("target_v") ? "target_v" : "comparator_v",
              "leaves the target (" + plain_number(target_v) + " V) outside the comparator's window (" +
                  plain_number(low_v) + " to " + plain_number(high_v) + " V)",
              "the window reaches from below the target to above it");
  }
}

void read_simulator(MapReader& map, const Site& site, SoundFigures sound, SimulatorSettings& settings) {
  const bool rate_sound =
      map.number("rate_hz", settings.rate_hz, {"the simulated sample rate", 1000.0, 200'000.0, "Hz"});
  map.whole_number("seed", settings.seed, "a seed");
  const bool pace_sound = map.yes_or_no("real_time", settings.real_time, "real_time");
  map.instant("begin", settings.begin, absent_means("the program's start"));
  const bool run_for_sound =
      map.duration("run_for", settings.run_for_s, {"the simulated time", 1.0, kLongestRunS},
                   absent_means("until stopped"));
  read_grid(map.section("grid"), site, sound, settings.rate_hz, rate_sound, settings.grid);
  read_servo(map.section("servo"), site, sound, settings.servo);
  read_script(map, site, sound, settings, run_for_sound);
  map.refuse_other_keys();
  if (pace_sound && !settings.real_time && !map.has("run_for")) {
    map.fault("real_time", "is false without run_for",
              "a simulation that does not wait for the clock needs an end, such as run_for: 24h");
  }
}

void read_recording(MapReader& map, RecordingSettings& settings) {
  const bool format_sound = map.word<RecordingFormat>("format", settings.format,
                                                      {{"by_name", RecordingFormat::by_name},
                                                       {"wav", RecordingFormat::wav},
                                                       {"csv", RecordingFormat::csv},
                                                       {"comtrade", RecordingFormat::comtrade}},
                                                      "the format of a recording");
  map.text("path", settings.path, "the path of the recording", 4000,
           absent_means("given when the program is started"));
  map.instant("begin", settings.begin, absent_means("the recording's own"));
  map.number("rate_hz", settings.rate_hz, {"the sample rate of a recording", 300.0, 1'000'000.0, "Hz"},
             absent_means("from its time column"));
  map.text("time_column", settings.time_column, "the name or number of the time column", 100,
           absent_means("none if rate_hz is given, else the first"));
  map.yes_or_no("primary", settings.primary, "primary");
  map.refuse_other_keys();
  if (map.has("rate_hz") && map.has("time_column")) {
    map.fault("time_column", "stands beside rate_hz",
              "samples are placed by a time column or by a rate, not by both");
  }
  if (!format_sound || settings.format == RecordingFormat::by_name) return;
  for (const std::string_view key : {"rate_hz", "time_column"}) {
    if (map.has(key) && settings.format != RecordingFormat::csv)
      map.fault(key, "has no meaning for this format", "it belongs to format: csv");
  }
  if (map.has("primary") && settings.format != RecordingFormat::comtrade) {
    map.fault("primary", "has no meaning for this format", "it belongs to format: comtrade");
  }
}

}  // namespace

void read_source(MapReader& map, Site& site, SoundFigures sound) {
  enum class Kind { none, simulator, recording, iio, serial, tcp, udp, audio, modbus_tcp, modbus_rtu };
  Kind kind = Kind::none;
  map.word<Kind>("kind", kind,
                 {{"simulator", Kind::simulator},
                  {"recording", Kind::recording},
                  {"iio", Kind::iio},
                  {"serial", Kind::serial},
                  {"tcp", Kind::tcp},
                  {"udp", Kind::udp},
                  {"sound", Kind::audio},
                  {"modbus_tcp", Kind::modbus_tcp},
                  {"modbus_rtu", Kind::modbus_rtu}},
                 "the kind of a source", kRequired);
  // Without a kind nothing can be said of the other keys.
  const auto is = [&](Kind one) { return kind == one || map.is_describing(); };
  if (is(Kind::simulator)) {
    SimulatorSettings settings;
    read_simulator(map, site, sound, settings);
    site.source = std::move(settings);
  }
  if (is(Kind::recording)) {
    RecordingSettings settings;
    read_recording(map, settings);
    site.source = std::move(settings);
  }
  if (is(Kind::iio)) site.source = read_iio(map);
  if (is(Kind::serial)) site.source = read_board(map, BoardSettings::Link::serial);
  if (is(Kind::tcp)) site.source = read_board(map, BoardSettings::Link::tcp);
  if (is(Kind::udp)) site.source = read_board(map, BoardSettings::Link::udp);
  if (is(Kind::audio)) site.source = read_sound(map);
  if (is(Kind::modbus_tcp)) site.source = read_polled_meter(map, PolledMeterSettings::Link::tcp, site);
  if (is(Kind::modbus_rtu)) site.source = read_polled_meter(map, PolledMeterSettings::Link::rtu, site);
}

}  // namespace tramline::config
