#pragma once

#include <array>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "config/units.hpp"

/// The text of a new site file from the answers to a few questions. Pure.
namespace tramline::tools {

/// A voltage and frequency that supplies are declared with.
struct SupplyPractice {
  double nominal_v;  ///< phase to neutral
  double nominal_hz;
  const char* where;
};
[[nodiscard]] const std::vector<SupplyPractice>& supply_practices();

/// What is known of a new site. What is empty was not answered.
struct SiteAnswers {
  struct Regulator {
    double target_v = 0.0;
    std::optional<double> band_pct;  ///< half its width; or
    std::optional<std::pair<double, double>> band_v;
    std::pair<double, double> input_v;
    std::optional<double> speed_v_per_s;
  };
  std::string name;
  std::string zone = "UTC";
  double nominal_v = 0.0;
  double nominal_hz = 50.0;
  int phases = 1;
  std::vector<Side> sides = {Side::input, Side::output};
  std::optional<Regulator> regulator;
  std::string source;  ///< kind, as the site file has it
  /// Keys of the source section, in their order, and their values as text.
  std::vector<std::pair<std::string, std::string>> source_keys;
  std::vector<std::string> source_channels;  ///< in the order of the channels; empty: as they come
  std::string logbook;
};

/// A kind of source, and the keys that one cannot do without.
struct SourceKind {
  const char* kind;
  const char* what;
  std::vector<const char*> keys;
  bool registers = false;  ///< each channel needs a source_channel
};
[[nodiscard]] const std::vector<SourceKind>& source_kinds();

/// A commented site file. It says what the answers say; whether that is allowed is for
/// `config::parse_site()`.
[[nodiscard]] std::string site_text(const SiteAnswers& answers);

/// Cautions for whoever is about to wire what the file describes, a paragraph each.
[[nodiscard]] const std::array<const char*, 4>& wiring_cautions();

}  // namespace tramline::tools
