#include <spdlog/fmt/fmt.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <cstdio>
#include <cstring>
#include <filesystem>
#include <iostream>
#include <memory>
#include <string>
#include <utility>
#include <vector>

#include "config/site_file.hpp"
#include "config/time_text.hpp"
#include "tools/commands.hpp"
#include "tools/found_sources.hpp"
#include "tools/interview.hpp"
#include "tools/paragraph.hpp"
#include "tools/question.hpp"
#include "tools/site_text.hpp"

namespace tramline::tools {
namespace {

/// What was given on the command line.
struct NewSite {
  std::string out;
  bool force = false;
  std::string name;
  std::string zone;
  double nominal_v = 0.0;
  double frequency_hz = 0.0;
  int phases = 0;
  std::string sides;
  bool no_regulator = false;
  double target_v = 0.0;
  double band_pct = 0.0;
  std::vector<double> band_v;
  std::vector<double> input_v;
  double speed_v_per_s = 0.0;
  std::string source;
  std::string device;
  std::string host;
  std::string port;
  std::string path;
  std::vector<std::string> source_channels;
  std::string logbook;
  std::string root = "/";

  [[nodiscard]] bool asks() const { return isatty(STDIN_FILENO) == 1 && isatty(STDOUT_FILENO) == 1; }
  [[nodiscard]] bool has_regulator() const {
    return target_v > 0.0 || band_pct > 0.0 || !band_v.empty() || !input_v.empty();
  }
  [[nodiscard]] const std::string& source_key(const std::string& key) const {
    return key == "device" ? device : key == "host" ? host : key == "port" ? port : path;
  }
};

std::pair<double, double> ends_of(const std::vector<double>& two) {
  return {two[0], two[1]};
}

const SourceKind* kind_named(const std::string& name) {
  for (const SourceKind& kind : source_kinds()) {
    if (name == kind.kind) return &kind;
  }
  return nullptr;
}

/// Which flags are missing where nobody can be asked.
std::vector<std::string> missing_flags(const NewSite& given) {
  std::vector<std::string> missing;
  const auto need = [&](bool there, const char* flag) {
    if (!there) missing.emplace_back(flag);
  };
  need(!given.name.empty(), "--name");
  need(given.nominal_v > 0.0, "--nominal-v");
  need(given.frequency_hz > 0.0, "--frequency-hz");
  if (given.has_regulator() && !given.no_regulator) {
    need(given.band_pct > 0.0 || !given.band_v.empty(), "--band-pct or --band-v");
    need(!given.input_v.empty(), "--input-v");
  } else {
    need(given.no_regulator, "--no-regulator, or --band-pct and --input-v");
  }
  need(!given.source.empty(), "--source");
  if (const SourceKind* kind = kind_named(given.source)) {
    for (const char* key : kind->keys) {
      if (given.source_key(key).empty()) missing.push_back("--" + std::string(key));
    }
    need(!kind->registers || !given.source_channels.empty(), "--source-channel");
  }
  return missing;
}

/// The machine's own zone, if it says so in the usual way.
std::string machine_zone() {
  std::error_code error;
  const std::string target = std::filesystem::read_symlink("/etc/localtime", error).string();
  const std::string folder = "zoneinfo/";
  const std::size_t at = target.find(folder);
  if (error || at == std::string::npos) return "UTC";
  const std::string zone = target.substr(at + folder.size());
  return config::zone_known(zone) ? zone : "UTC";
}

void ask_supply(Interview& interview, NewSite& given) {
  if (given.nominal_v > 0.0 && given.frequency_hz > 0.0) return;
  std::vector<std::string> choices;
  for (const SupplyPractice& practice : supply_practices())
    choices.push_back(
        fmt::format("{:g} V, {:g} Hz   {}", practice.nominal_v, practice.nominal_hz, practice.where));
  choices.emplace_back("another");
  interview.say(
      "\nThe declared voltage of the supply, phase to neutral. The plate at the meter or the utility says "
      "it.\n");
  const std::size_t chosen = interview.choice("Which", choices, 0);
  if (chosen < supply_practices().size()) {
    given.nominal_v = supply_practices()[chosen].nominal_v;
    given.frequency_hz = supply_practices()[chosen].nominal_hz;
    return;
  }
  given.nominal_v = interview.number("Volts, phase to neutral", 0.0, 1.0, 100'000.0);
  given.frequency_hz = interview.choice("Frequency", {"50 Hz", "60 Hz"}, 0) == 0 ? 50.0 : 60.0;
}

void ask_regulator(Interview& interview, NewSite& given) {
  if (given.no_regulator || given.sides == "input") return;
  if (!given.has_regulator() && !interview.yes("\nIs there a regulator", true)) {
    given.no_regulator = true;
    return;
  }
  if (!(given.target_v > 0.0))
    given.target_v =
        interview.number("Its output voltage, phase to neutral", given.nominal_v, 1.0, 100'000.0);
  if (!(given.band_pct > 0.0) && given.band_v.empty())
    given.band_pct = interview.number("Its accuracy, plus or minus percent", 3.0, 0.1, 50.0);
  if (given.input_v.empty()) {
    const auto [low, high] = interview.range("Its input range in volts, phase to neutral, from its plate");
    given.input_v = {low, high};
  }
  if (!(given.speed_v_per_s > 0.0))
    given.speed_v_per_s =
        interview.number_or_none("Its correction speed in volts a second", 0.1, 10'000.0).value_or(0.0);
}

void ask_source(Interview& interview, NewSite& given) {
  if (given.source.empty()) {
    interview.say("\nWhere the samples come from. Begin with the simulator if nothing is wired yet.\n");
    std::vector<FoundSource> found = found_sources(given.root);
    std::vector<std::string> choices;
    for (const SourceKind& kind : source_kinds())
      choices.push_back(fmt::format("{:<11} {}", kind.kind, kind.what));
    for (const FoundSource& source : found)
      choices.push_back(fmt::format("{:<11} found here: {} ({})", source.kind, source.device, source.what));
    const std::size_t chosen = interview.choice("Which", choices, 0);
    if (chosen < source_kinds().size()) {
      given.source = source_kinds()[chosen].kind;
    } else {
      given.source = found[chosen - source_kinds().size()].kind;
      given.device = found[chosen - source_kinds().size()].device;
    }
  }
  const SourceKind* kind = kind_named(given.source);
  if (kind == nullptr) return;
  for (const std::string key : kind->keys) {
    std::string& into = key == "device" ? given.device
                        : key == "host" ? given.host
                        : key == "port" ? given.port
                                        : given.path;
    if (into.empty()) into = interview.text("Its " + key, "");
  }
  if (!kind->registers || !given.source_channels.empty()) return;
  for (const char* side : {"input", "output"}) {
    if (given.sides != "both" && given.sides != side) continue;
    for (int p = 1; p <= given.phases; ++p)
      given.source_channels.push_back(
          interview.text(fmt::format("Register of the {} L{}, such as input:0:f32", side, p), ""));
  }
}

/// Asks for what was not given.
void ask(Interview& interview, NewSite& given) {
  for (const char* caution : wiring_cautions())
    interview.say(indented(caution, 0));
  interview.say("\nAn empty line takes what stands in brackets.\n");
  if (given.name.empty()) given.name = interview.text("Name of the site", "");
  if (given.zone.empty()) {
    given.zone = interview.text("Time zone", machine_zone(), [](const std::string& zone) {
      return config::zone_known(zone)
                 ? ""
                 : "A name of the IANA time zone database is needed, such as Asia/Kolkata.";
    });
  }
  ask_supply(interview, given);
  if (given.phases == 0) given.phases = interview.yes("Is it three-phase", false) ? 3 : 1;
  if (given.sides.empty()) {
    const std::vector<std::string> sides = {"both", "input", "output"};
    given.sides = sides[interview.choice(
        "\nWhere sensors are",
        {"before and after the regulator", "before it only, or there is none", "after it only"}, 0)];
  }
  ask_regulator(interview, given);
  ask_source(interview, given);
}

SiteAnswers answers_of(const NewSite& given) {
  SiteAnswers answers;
  answers.name = given.name;
  if (!given.zone.empty()) answers.zone = given.zone;
  answers.nominal_v = given.nominal_v;
  answers.nominal_hz = given.frequency_hz;
  answers.phases = given.phases == 3 ? 3 : 1;
  if (given.sides == "input") answers.sides = {Side::input};
  if (given.sides == "output") answers.sides = {Side::output};
  if (given.has_regulator() && !given.no_regulator) {
    SiteAnswers::Regulator regulator;
    regulator.target_v = given.target_v > 0.0 ? given.target_v : given.nominal_v;
    if (!given.band_v.empty()) regulator.band_v = ends_of(given.band_v);
    if (given.band_pct > 0.0) regulator.band_pct = given.band_pct;
    regulator.input_v = ends_of(given.input_v);
    if (given.speed_v_per_s > 0.0) regulator.speed_v_per_s = given.speed_v_per_s;
    answers.regulator = regulator;
  }
  answers.source = given.source;
  for (const char* key : {"path", "device", "host", "port"}) {
    if (!given.source_key(key).empty()) answers.source_keys.emplace_back(key, given.source_key(key));
  }
  answers.source_channels = given.source_channels;
  answers.logbook =
      given.logbook.empty() ? std::filesystem::path(given.out).stem().string() + ".logbook" : given.logbook;
  return answers;
}

/// Writes a new file; an old one only with `force`, and whole or not at all.
Status write_file(const std::string& path, const std::string& text, bool force) {
  const std::string begun = force ? path + ".new" : path;
  const auto fail = [&](const std::string& what) {
    return Error{path, what + ": " + std::strerror(errno),
                 "see that the folder exists and may be written to"};
  };
  std::FILE* file = std::fopen(begun.c_str(), force ? "w" : "wx");
  if (file == nullptr && errno == EEXIST)
    return Error{path, "is there already", "give another name, or --force to replace it"};
  if (file == nullptr) return fail("cannot be created");
  const bool written = std::fwrite(text.data(), 1, text.size(), file) == text.size();
  const bool closed = std::fclose(file) == 0;
  if (!written || !closed || (force && std::rename(begun.c_str(), path.c_str()) != 0)) {
    const Error error = fail("cannot be written");
    std::remove(begun.c_str());
    return error;
  }
  return kDone;
}

ExitStatus run(NewSite given) {
  std::error_code ignored;
  if (!given.force && std::filesystem::exists(given.out, ignored))
    return tell({given.out, "is there already", "give another name, or --force to replace it"},
                ExitStatus::wrong_usage);
  if (given.asks()) {
    Interview interview(std::cin, std::cout);
    ask(interview, given);
    if (interview.ended())
      return tell({"", "the answers ended early", "nothing was written"}, ExitStatus::wrong_usage);
  } else if (const auto missing = missing_flags(given); !missing.empty()) {
    for (const std::string& flag : missing)
      tell({"new-site", "nobody can be asked here, and " + flag + " is missing", ""},
           ExitStatus::wrong_usage);
    return ExitStatus::wrong_usage;
  }

  const std::string text = site_text(answers_of(given));
  const config::SiteFile file = config::parse_site(text, given.out);
  if (!file.ok()) {
    for (const config::Fault& fault : file.faults)
      tell({fault.path, fault.what, fault.allowed}, ExitStatus::wrong_usage);
    return tell({given.out, "was not written", ""}, ExitStatus::wrong_usage);
  }
  std::cerr << file.remark_text();
  if (const auto written = write_file(given.out, text, given.force); !written)
    return tell(written.error(), ExitStatus::could_not);

  if (!given.asks()) {
    for (const char* caution : wiring_cautions())
      std::cout << indented(caution, 0);
  }
  std::cout << "\nWritten: " << given.out << "\nNext:\n"
            << "  tramlined --check " << given.out << "   after each change to it\n"
            << "  tramlined --probe " << given.out
            << "   as soon as the source is there: what is measured, what to fix\n";
  return ExitStatus::answered;
}

}  // namespace

void add_new_site(CLI::App& app, ExitStatus& status) {
  auto* command = app.add_subcommand("new-site", "write a site file, by questions or by flags");
  auto given = std::make_shared<NewSite>();
  NewSite& g = *given;
  command->add_option("FILE", g.out, "the site file to write")->required();
  command->add_flag("--force", g.force, "replace the file if it is there");
  command->add_option("--name", g.name, "your own words for the place");
  command->add_option("--zone", g.zone, "IANA time zone; UTC unless given");
  command->add_option("--nominal-v", g.nominal_v, "declared voltage, phase to neutral")
      ->check(CLI::PositiveNumber);
  command->add_option("--frequency-hz", g.frequency_hz, "50 or 60")->check(CLI::IsMember({50, 60}));
  command->add_option("--phases", g.phases, "1 or 3; 1 unless given")->check(CLI::IsMember({1, 3}));
  command->add_option("--sides", g.sides, "where sensors are: both (unless given), input, output")
      ->check(CLI::IsMember({"both", "input", "output"}));
  command->add_flag("--no-regulator", g.no_regulator, "there is none");
  command->add_option("--target-v", g.target_v, "the regulator's output; the nominal voltage unless given")
      ->check(CLI::PositiveNumber);
  auto* band_pct = command->add_option("--band-pct", g.band_pct, "its accuracy, plus or minus percent")
                       ->check(CLI::PositiveNumber);
  command->add_option("--band-v", g.band_v, "or the ends of its band, LOW HIGH")
      ->expected(2)
      ->excludes(band_pct);
  command->add_option("--input-v", g.input_v, "its input range, LOW HIGH")->expected(2);
  command->add_option("--speed-v-per-s", g.speed_v_per_s, "its correction speed")->check(CLI::PositiveNumber);
  std::vector<std::string> kinds;
  for (const SourceKind& kind : source_kinds())
    kinds.emplace_back(kind.kind);
  command->add_option("--source", g.source, "kind of source")->check(CLI::IsMember(kinds));
  command->add_option("--device", g.device, "the source's device");
  command->add_option("--host", g.host, "the source's host");
  command->add_option("--port", g.port, "the source's port")->check(CLI::Range(1, 65535));
  command->add_option("--path", g.path, "the recording");
  command->add_option(
      "--source-channel", g.source_channels,
      "the source's channels: input L1, L2, L3, then output L1, L2, L3, as far as they are there");
  command->add_option("--logbook", g.logbook, "where the record goes; beside FILE unless given");
  command->add_option("--devices-under", g.root, "where to look for devices instead of /")->group("");
  command->callback([given, &status] { status = run(*given); });
}

}  // namespace tramline::tools
