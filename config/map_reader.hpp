#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "config/fault.hpp"
#include "config/units.hpp"
#include "config/yaml_tree.hpp"

namespace tramline::config {

/// One key of the site file, in the words of its documentation.
struct KeyDescription {
  std::string path;      ///< `events.sag_pct`, `channels[].scale`
  std::string unit;      ///< "percent of nominal_v"; empty if it has none
  std::string standard;  ///< the value it has when it is left out; "required" if it must not be
  std::string allowed;   ///< "1 to 100"
};

/// What it means when a key is not there.
struct Absent {
  bool allowed = true;
  std::string_view meaning;  ///< shown instead of the default, if the default is a rule and no number
};
inline constexpr Absent kRequired{false, {}};
constexpr Absent absent_means(std::string_view meaning) {
  return {true, meaning};
}

/// Which numbers a key takes: "`noun` lies between `low` and `high` `unit`", both limits included.
struct NumberRule {
  std::string_view noun;
  double low;
  double high;
  std::string_view unit = {};
};

/// The words a key takes, each with its meaning.
template <class T>
using Words = std::vector<std::pair<std::string_view, T>>;

/// `x` as short as it goes without an exponent.
std::string plain_number(double x);

/// Reads one map of a YAML tree key by key, checks each value alone and notes every fault; then the caller
/// checks values against each other, which the returned bools are for: true means that `into` holds a sound
/// value, the file's or the default it had. A key that is asked for is a key that is known:
/// `refuse_other_keys()` comes last.
///
/// The same questions put to `MapReader::describing()` list the keys instead. The node must outlive the
/// reader.
class MapReader {
 public:
  /// `node` must be a map or null, else that is a fault and the map counts as not there.
  MapReader(const YamlNode& node, std::string path, Findings& findings);
  /// For a map that is not there: nothing in it is missed.
  MapReader(std::string path, Findings& findings);
  /// Lists into `keys` what is asked for.
  static MapReader describing(std::string path, Findings& findings, std::vector<KeyDescription>& keys);

  [[nodiscard]] bool is_describing() const { return keys_ != nullptr; }
  [[nodiscard]] bool is_there() const { return map_ != nullptr; }
  [[nodiscard]] bool has(std::string_view key) const { return find(key) != nullptr; }
  [[nodiscard]] Position at() const { return at_; }
  /// Where the key's value stands; the map's own place if the key is not there.
  [[nodiscard]] Position at(std::string_view key) const;
  [[nodiscard]] std::string path(std::string_view key) const;

  bool number(std::string_view key, double& into, const NumberRule& rule, Absent absent = {});
  bool number(std::string_view key, std::optional<double>& into, const NumberRule& rule, Absent absent = {});
  bool whole_number(std::string_view key, std::uint64_t& into, std::string_view noun);
  /// `[low, high]`, low < high.
  bool range(std::string_view key, double& low, double& high, const NumberRule& rule, Absent absent = {});
  /// Seconds from a duration text; the rule's limits are seconds.
  bool duration(std::string_view key, double& into_s, const NumberRule& rule, Absent absent = {});
  bool instant(std::string_view key, std::optional<UtcNs>& into, Absent absent = {});
  /// A text of 1 to `most` characters, none of them a control character.
  bool text(std::string_view key, std::string& into, std::string_view noun, std::size_t most,
            Absent absent = {});
  bool yes_or_no(std::string_view key, bool& into, std::string_view noun, Absent absent = {});
  template <class T>
  bool word(std::string_view key, T& into, const Words<T>& words, std::string_view noun, Absent absent = {});

  /// The map under `key`; as if not there if it is none.
  MapReader section(std::string_view key, Absent absent = {});
  /// Calls `read(MapReader)` for each item of the list of maps under `key`.
  template <class Read>
  void each(std::string_view key, std::string_view noun, Read read, Absent absent = {});
  /// The values of a list of scalars, or a single scalar, under `key`.
  std::vector<const YamlNode*> scalars(std::string_view key, std::string_view noun,
                                       const KeyDescription& description);
  /// The map under `key`, whose keys are no fixed words; nullptr if it is not there.
  const YamlNode* free_map(std::string_view key, std::string_view noun, const KeyDescription& description);

  /// Every key that was not asked for is a fault; the nearest known one is suggested.
  void refuse_other_keys();

  /// A number at `node` within `rule`, else a fault at `path`.
  std::optional<double> number_at(const YamlNode& node, const std::string& path, const NumberRule& rule);
  /// A fault of the value of `key` (of the map if the key is not there), for checks of values against each
  /// other.
  void fault(std::string_view key, std::string what, std::string allowed);
  /// A fault of the map as a whole.
  void fault_here(std::string what, std::string allowed);
  void fault_at(Position at, std::string path, std::string what, std::string allowed);
  void remark(std::string_view key, std::string what, std::string advice);

 private:
  [[nodiscard]] const YamlNode* find(std::string_view key) const;
  /// The value of `key`, which is known from now on; nullptr if it is not there, a fault if it should be.
  const YamlNode* ask(std::string_view key, Absent absent, std::string_view allowed);
  const YamlNode* ask_list(std::string_view key, std::string_view noun, Absent absent);
  /// The text of the scalar under `key` if it is one of `words`.
  std::optional<std::size_t> word_index(std::string_view key, const std::vector<std::string_view>& words,
                                        std::string_view noun, Absent absent);
  void describe(std::string_view key, std::string_view unit, std::string standard, std::string allowed,
                Absent absent);

  const YamlNode* map_ = nullptr;
  Position at_;
  std::string path_;
  Findings* findings_;
  std::vector<KeyDescription>* keys_ = nullptr;
  std::vector<std::string_view> known_;  // the literals that were asked for
};

template <class T>
bool MapReader::word(std::string_view key, T& into, const Words<T>& words, std::string_view noun,
                     Absent absent) {
  std::vector<std::string_view> names;
  std::string standard;
  std::string allowed;
  for (const auto& [name, meaning] : words) {
    names.push_back(name);
    allowed += (allowed.empty() ? "" : ", ") + std::string(name);
    if (meaning == into) standard = name;
  }
  describe(key, "", standard, allowed, absent);
  const bool needed = !absent.allowed && is_there() && !has(key);
  const auto index = word_index(key, names, noun, absent);
  if (index) into = words[*index].second;
  return index.has_value() || (!has(key) && !needed);
}

template <class Read>
void MapReader::each(std::string_view key, std::string_view noun, Read read, Absent absent) {
  if (is_describing()) {
    read(describing(path(key) + "[]", *findings_, *keys_));
    return;
  }
  const YamlNode* list = ask_list(key, noun, absent);
  if (list == nullptr) return;
  for (std::size_t i = 0; i < list->items.size(); ++i) {
    read(MapReader(list->items[i], path(key) + "[" + std::to_string(i + 1) + "]", *findings_));
  }
}

}  // namespace tramline::config
