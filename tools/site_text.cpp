#include "tools/site_text.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <nlohmann/json.hpp>
#include <string_view>

namespace tramline::tools {
namespace {

/// `text` as a YAML string: JSON's quoting is also YAML's.
std::string quoted(const std::string& text) {
  return nlohmann::json(text).dump(-1, ' ', false, nlohmann::json::error_handler_t::replace);
}

std::string plain(double number) {
  return fmt::format("{:.10g}", number);
}

std::string range(const std::pair<double, double>& ends) {
  return "[" + plain(ends.first) + ", " + plain(ends.second) + "]";
}

bool is_number(const std::string& text) {
  return !text.empty() && text.find_first_not_of("0123456789.") == std::string::npos;
}

/// `text` as comment lines of at most 96 characters.
std::string comment(std::string_view text) {
  constexpr std::size_t kWidth = 96;
  std::string out = "#";
  std::size_t width = 1;
  while (!text.empty()) {
    const std::size_t end = std::min(text.find(' '), text.size());
    const std::string_view word = text.substr(0, end);
    text.remove_prefix(std::min(end + 1, text.size()));
    if (width + 1 + word.size() > kWidth) {
      out += "\n#";
      width = 1;
    }
    out += ' ';
    out += word;
    width += 1 + word.size();
  }
  return out + "\n";
}

std::string regulator_text(const SiteAnswers::Regulator& regulator) {
  std::string text = "\n" + comment("The regulator, by its plate and its papers.") + "regulator:\n";
  text +=
      fmt::format("  target_v: {}   # the output it aims at, phase to neutral\n", plain(regulator.target_v));
  if (regulator.band_v)
    text += fmt::format("  band_v: {}   # it lets the output be between these\n", range(*regulator.band_v));
  else if (regulator.band_pct)
    text += fmt::format("  band_pct: {}   # it holds the output within so many percent of the target\n",
                        plain(*regulator.band_pct));
  text += fmt::format("  input_v: {}   # the input range of its plate\n", range(regulator.input_v));
  if (regulator.speed_v_per_s)
    text += fmt::format("  speed_v_per_s: {}   # output volts a second while it corrects\n",
                        plain(*regulator.speed_v_per_s));
  else
    text +=
        "  # speed_v_per_s: 20   # output volts a second while it corrects; without it blame is laid by "
        "range alone\n";
  return text;
}

std::string channels_text(const SiteAnswers& answers) {
  std::string text =
      "\n" +
      comment(
          "One line a sensor: input is the supply before the regulator, output is what the load gets. volts "
          "= "
          "(raw + offset) * scale; find scale and offset with a reference meter. range_v is the sensor's "
          "limit, peak: a voltage that reaches it is marked over-range, not believed.") +
      "#\n";
  for (const char* caution : wiring_cautions())
    text += comment(caution);
  text += "channels:\n";
  std::size_t n = 0;
  for (const Side side : answers.sides) {
    for (int p = 0; p < answers.phases; ++p, ++n) {
      text += fmt::format("  - {{side: {}", name_of(side));
      if (answers.phases > 1) text += fmt::format(", phase: {}", name_of(static_cast<Phase>(p)));
      if (n < answers.source_channels.size())
        text += fmt::format(", source_channel: {}", quoted(answers.source_channels[n]));
      text += ", scale: 1, offset: 0}\n";
    }
  }
  return text;
}

}  // namespace

const std::vector<SupplyPractice>& supply_practices() {
  // Voltages phase to neutral. Rules named from memory, but for the United Kingdom's (SI 1994/3021).
  static const std::vector<SupplyPractice> practices = {
      {230.0, 50.0, "230/400 V (IEC 60038): Europe, United Kingdom, Australia, much of Africa and Asia"},
      {240.0, 50.0, "240/415 V: declared in parts of India and elsewhere"},
      {220.0, 50.0, "220/380 V (GB/T 12325): China, and older declarations elsewhere"},
      {120.0, 60.0, "120/208 and 120/240 V (ANSI C84.1): North America"},
      {277.0, 60.0, "277/480 V (IEC 60038): three-phase buildings and plants in North America"},
      {347.0, 60.0, "347/600 V (IEC 60038): plants in Canada"},
      {230.0, 60.0, "230/400 V at 60 Hz (IEC 60038)"},
      {100.0, 50.0, "100 V at 50 Hz: the east of Japan"},
      {100.0, 60.0, "100 V at 60 Hz: the west of Japan"},
  };
  return practices;
}

const std::vector<SourceKind>& source_kinds() {
  static const std::vector<SourceKind> kinds = {
      {"simulator", "a made-up supply and regulator, to try everything with", {}},
      {"recording", "a file: WAV, CSV or COMTRADE", {"path"}},
      {"iio", "a converter of the kernel's industrial I/O", {"device"}},
      {"serial", "a board that sends board frames over a serial port", {"device"}},
      {"tcp", "a box that sends board frames over TCP", {"host", "port"}},
      {"udp", "a box that sends board frames over UDP", {"port"}},
      {"sound", "a sound interface behind isolating sensors", {"device"}},
      {"modbus_tcp", "a meter that gives r.m.s. values over Modbus/TCP", {"host"}, true},
      {"modbus_rtu", "a meter that gives r.m.s. values over a serial Modbus", {"device"}, true},
  };
  return kinds;
}

const std::array<const char*, 4>& wiring_cautions() {
  static const std::array<const char*, 4> cautions = {
      "CAUTION: mains voltage kills. Sensors are wired only by people who are competent and, where the law "
      "asks for "
      "it, licensed, by local codes and the makers' instructions: isolate, lock off, and prove dead with a "
      "tester that "
      "was itself proved before and after.",
      "Sensors must carry the measurement category of their place (IEC 61010): CAT II at socket outlets, CAT "
      "III in the "
      "building's fixed wiring, where a regulator is mounted, CAT IV at the service entrance. Each live "
      "sense lead has "
      "a fuse of high breaking capacity close to the tap.",
      "A resistive divider alone does NOT isolate. A regulator with a variable autotransformer does not "
      "either: its "
      "output may be live to earth with the knob at zero. Never feed it from the output side.",
      "Nothing here protects people or equipment; fit an independent overvoltage trip.",
  };
  return cautions;
}

std::string site_text(const SiteAnswers& answers) {
  std::string text =
      comment("A Tramline site. SITE-FILE.md describes every key; what is left out has its default.") + "\n";
  text += "site:\n";
  text += fmt::format("  name: {}\n", quoted(answers.name));
  text += fmt::format("  zone: {}   # in which people read its times\n", quoted(answers.zone));
  text += fmt::format("  nominal_v: {}   # declared voltage, r.m.s., phase to neutral\n",
                      plain(answers.nominal_v));
  text += fmt::format("  frequency_hz: {}\n", plain(answers.nominal_hz));
  text += fmt::format("  phases: {}\n", answers.phases);
  if (answers.regulator) text += regulator_text(*answers.regulator);
  text += channels_text(answers);
  text += "\n" + comment("Where the record goes; a relative path begins in this file's folder.");
  text += fmt::format("logbook:\n  path: {}\n", quoted(answers.logbook));
  text += "\n" + comment("Where the samples come from.") + "source:\n";
  text += fmt::format("  kind: {}\n", is_number(answers.source) ? quoted(answers.source) : answers.source);
  for (const auto& [key, value] : answers.source_keys)
    text += fmt::format("  {}: {}\n", key, is_number(value) ? value : quoted(value));
  return text;
}

}  // namespace tramline::tools
