#include "config/map_reader.hpp"

#include <algorithm>
#include <charconv>
#include <cmath>
#include <limits>
#include <map>
#include <system_error>

#include "config/nearest_word.hpp"
#include "config/time_text.hpp"

namespace tramline::config {
namespace {

/// "is 101", "has no value", "is a list"; it follows the key's path.
std::string what_it_is(const YamlNode& node) {
  switch (node.kind) {
    case YamlNode::Kind::null:
      return "has no value";
    case YamlNode::Kind::list:
      return "is a list";
    case YamlNode::Kind::map:
      return "is a map of keys";
    case YamlNode::Kind::scalar:
      break;
  }
  return node.quoted ? "is the text \"" + shown(node.text) + "\"" : "is " + shown(node.text);
}

/// Plain finite decimals only: no hexadecimal, no infinity, nothing in quotes.
std::optional<double> plain_double(const YamlNode& node) {
  if (node.kind != YamlNode::Kind::scalar || node.quoted) return std::nullopt;
  std::string_view text = node.text;
  if (text.size() > 1 && text.front() == '+' && text[1] != '-') text.remove_prefix(1);
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc{} || end != text.data() + text.size() || !std::isfinite(value)) return std::nullopt;
  return value;
}

std::string limits(const NumberRule& rule, std::string_view between, std::string_view and_then) {
  return std::string(between) + plain_number(rule.low) + std::string(and_then) + plain_number(rule.high);
}

std::string with_unit(std::string sentence, std::string_view unit) {
  if (!unit.empty()) sentence.append(" ").append(unit);
  return sentence;
}

std::string number_sentence(const NumberRule& rule) {
  return with_unit(std::string(rule.noun) + limits(rule, " lies between ", " and "), rule.unit);
}

std::string range_sentence(const NumberRule& rule) {
  return with_unit(
      std::string(rule.noun) + " is [lower, higher], two numbers" + limits(rule, " between ", " and "),
      rule.unit);
}

std::string duration_sentence(const NumberRule& rule) {
  const auto text = [](double s) { return format_duration(std::llround(s * 1e9)); };
  return std::string(rule.noun) + " lies between " + text(rule.low) + " and " + text(rule.high) +
         ", written such as 2h 5m, 1.5s, 200ms or as seconds";
}

std::size_t characters(std::string_view utf8) {
  return static_cast<std::size_t>(std::count_if(
      utf8.begin(), utf8.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xC0U) != 0x80U; }));
}

bool holds_control_character(std::string_view text) {
  return std::any_of(text.begin(), text.end(),
                     [](char c) { return static_cast<unsigned char>(c) < 0x20 || c == 0x7F; });
}

}  // namespace

std::string plain_number(double x) {
  char text[400];  // the longest double without exponent has some 330 characters
  const auto [end, error] = std::to_chars(text, text + sizeof text, x, std::chars_format::fixed);
  return error == std::errc{} ? std::string(text, end) : std::string();
}

MapReader::MapReader(const YamlNode& node, std::string path, Findings& findings)
    : at_(node.at), path_(std::move(path)), findings_(&findings) {
  if (node.kind != YamlNode::Kind::map && node.kind != YamlNode::Kind::null) {
    findings.fault(node.at, path_, what_it_is(node),
                   "keys with values are expected here, each as key: value");
    return;
  }
  map_ = &node;
  std::map<std::string_view, Position> seen;
  for (const YamlNode::Key& key : node.keys) {
    const auto [first, is_new] = seen.emplace(key.name, key.at);
    if (is_new) continue;
    findings.fault(key.at, this->path(shown(key.name)),
                   "stands here again after line " + std::to_string(first->second.line),
                   "give each key once");
  }
}

MapReader::MapReader(std::string path, Findings& findings) : path_(std::move(path)), findings_(&findings) {}

MapReader MapReader::describing(std::string path, Findings& findings, std::vector<KeyDescription>& keys) {
  MapReader reader(std::move(path), findings);
  reader.keys_ = &keys;
  return reader;
}

const YamlNode* MapReader::find(std::string_view key) const {
  if (map_ == nullptr) return nullptr;
  for (std::size_t i = 0; i < map_->keys.size(); ++i) {
    if (map_->keys[i].name == key) return &map_->items[i];
  }
  return nullptr;
}

Position MapReader::at(std::string_view key) const {
  const YamlNode* node = find(key);
  return node == nullptr ? at_ : node->at;
}

std::string MapReader::path(std::string_view key) const {
  return path_.empty() ? std::string(key) : path_ + "." + std::string(key);
}

void MapReader::describe(std::string_view key, std::string_view unit, std::string standard,
                         std::string allowed, Absent absent) {
  if (keys_ == nullptr) return;
  if (!absent.meaning.empty()) standard = absent.meaning;
  if (!absent.allowed) standard = "required";
  keys_->push_back({path(key), std::string(unit), std::move(standard), std::move(allowed)});
}

const YamlNode* MapReader::ask(std::string_view key, Absent absent, std::string_view allowed) {
  known_.push_back(key);
  const YamlNode* node = find(key);
  if (node == nullptr && is_there() && !absent.allowed) {
    findings_->fault(at_, path(key), "is missing", std::string(allowed));
  }
  return node;
}

bool MapReader::number(std::string_view key, double& into, const NumberRule& rule, Absent absent) {
  describe(key, rule.unit, plain_number(into), limits(rule, "", " to "), absent);
  const YamlNode* node = ask(key, absent, number_sentence(rule));
  if (node == nullptr) return absent.allowed;
  const auto value = number_at(*node, path(key), rule);
  if (value) into = *value;
  return value.has_value();
}

bool MapReader::number(std::string_view key, std::optional<double>& into, const NumberRule& rule,
                       Absent absent) {
  double value = into.value_or(0.0);
  const bool sound = number(key, value, rule, absent);
  if (sound && has(key)) into = value;
  return sound;
}

std::optional<double> MapReader::number_at(const YamlNode& node, const std::string& path,
                                           const NumberRule& rule) {
  const auto value = plain_double(node);
  if (value && *value >= rule.low && *value <= rule.high) return value;
  std::string allowed = number_sentence(rule);
  if (!value && node.kind == YamlNode::Kind::scalar) allowed += ", written as a plain number such as 2.5";
  findings_->fault(node.at, path, what_it_is(node), std::move(allowed));
  return std::nullopt;
}

bool MapReader::whole_number(std::string_view key, std::uint64_t& into, std::string_view noun) {
  describe(key, "", std::to_string(into), "whole number from 0", {});
  const YamlNode* node = ask(key, {}, "");
  if (node == nullptr) return true;
  const char* const begin = node->text.data();
  const char* const end = begin + node->text.size();
  const auto [stop, error] = std::from_chars(begin, end, into);
  if (node->kind == YamlNode::Kind::scalar && !node->quoted && error == std::errc{} && stop == end)
    return true;
  findings_->fault(node->at, path(key), what_it_is(*node),
                   std::string(noun) + " is a whole number between 0 and " +
                       std::to_string(std::numeric_limits<std::uint64_t>::max()));
  return false;
}

bool MapReader::range(std::string_view key, double& low, double& high, const NumberRule& rule,
                      Absent absent) {
  describe(key, rule.unit, "none", "[lower, higher], " + limits(rule, "", " to "), absent);
  const YamlNode* node = ask(key, absent, range_sentence(rule));
  if (node == nullptr) return absent.allowed;
  if (node->kind != YamlNode::Kind::list || node->items.size() != 2) {
    const bool list = node->kind == YamlNode::Kind::list;
    findings_->fault(node->at, path(key),
                     list ? "is a list of " + std::to_string(node->items.size()) : what_it_is(*node),
                     range_sentence(rule));
    return false;
  }
  const auto first = number_at(node->items[0], path(key) + "[1]", rule);
  const auto second = number_at(node->items[1], path(key) + "[2]", rule);
  if (!first || !second) return false;
  if (*first >= *second) {
    findings_->fault(node->at, path(key),
                     "is [" + shown(node->items[0].text) + ", " + shown(node->items[1].text) + "]",
                     "the first number is the lower one");
    return false;
  }
  low = *first;
  high = *second;
  return true;
}

bool MapReader::duration(std::string_view key, double& into_s, const NumberRule& rule, Absent absent) {
  const auto text = [](double s) { return format_duration(std::llround(s * 1e9)); };
  describe(key, "duration", text(into_s), text(rule.low) + " to " + text(rule.high), absent);
  const YamlNode* node = ask(key, absent, duration_sentence(rule));
  if (node == nullptr) return absent.allowed;
  if (node->kind != YamlNode::Kind::scalar) {
    findings_->fault(node->at, path(key), what_it_is(*node), duration_sentence(rule));
    return false;
  }
  const Result<std::int64_t> ns = parse_duration(node->text);
  if (!ns) {
    findings_->fault(node->at, path(key), what_it_is(*node) + ": " + ns.error().what,
                     duration_sentence(rule));
    return false;
  }
  const double s = static_cast<double>(ns.value()) * 1e-9;
  if (s < rule.low || s > rule.high) {
    findings_->fault(node->at, path(key), what_it_is(*node), duration_sentence(rule));
    return false;
  }
  into_s = s;
  return true;
}

bool MapReader::instant(std::string_view key, std::optional<UtcNs>& into, Absent absent) {
  describe(key, "ISO 8601 with offset", "none", "years 1970 to 2199", absent);
  const YamlNode* node = ask(key, absent, "");
  if (node == nullptr) return absent.allowed;
  // Any scalar is tried, so that what is no time gets the remedy with an example.
  const Result<UtcNs> t = parse_utc(node->text);
  if (node->kind == YamlNode::Kind::scalar && t) {
    into = t.value();
    return true;
  }
  const bool scalar = node->kind == YamlNode::Kind::scalar;
  findings_->fault(node->at, path(key), what_it_is(*node) + (scalar ? ": " + t.error().what : ""),
                   t ? "" : t.error().remedy);
  return false;
}

bool MapReader::text(std::string_view key, std::string& into, std::string_view noun, std::size_t most,
                     Absent absent) {
  describe(key, "", into.empty() ? "none" : into, "1 to " + std::to_string(most) + " characters", absent);
  const std::string sentence =
      std::string(noun) + " is a text of 1 to " + std::to_string(most) + " characters on one line";
  const YamlNode* node = ask(key, absent, sentence);
  if (node == nullptr) return absent.allowed;
  if (node->kind != YamlNode::Kind::scalar || node->text.empty() || characters(node->text) > most ||
      holds_control_character(node->text)) {
    findings_->fault(node->at, path(key), what_it_is(*node), sentence);
    return false;
  }
  into = node->text;
  return true;
}

bool MapReader::yes_or_no(std::string_view key, bool& into, std::string_view noun, Absent absent) {
  return word<bool>(key, into, {{"true", true}, {"false", false}}, noun, absent);
}

std::optional<std::size_t> MapReader::word_index(std::string_view key,
                                                 const std::vector<std::string_view>& words,
                                                 std::string_view noun, Absent absent) {
  std::string sentence = std::string(noun) + " is ";
  for (std::size_t i = 0; i < words.size(); ++i) {
    sentence += (i == 0 ? "" : i + 1 == words.size() ? " or " : ", ") + std::string(words[i]);
  }
  const YamlNode* node = ask(key, absent, sentence);
  if (node == nullptr) return std::nullopt;
  if (node->kind == YamlNode::Kind::scalar) {
    // 50.0 means 50.
    const auto number = plain_double(*node);
    const std::string written = number ? plain_number(*number) : node->text;
    const auto found = std::find(words.begin(), words.end(), written);
    if (found != words.end()) return static_cast<std::size_t>(found - words.begin());
    const std::string_view near = number ? std::string_view() : nearest_word(node->text, words);
    if (!near.empty()) sentence += "; did you mean " + std::string(near) + "?";
  }
  findings_->fault(node->at, path(key), what_it_is(*node), std::move(sentence));
  return std::nullopt;
}

MapReader MapReader::section(std::string_view key, Absent absent) {
  if (is_describing()) return describing(path(key), *findings_, *keys_);
  const YamlNode* node = ask(key, absent, "this section must be there");
  return node == nullptr ? MapReader(path(key), *findings_) : MapReader(*node, path(key), *findings_);
}

const YamlNode* MapReader::ask_list(std::string_view key, std::string_view noun, Absent absent) {
  const std::string sentence = std::string(noun) + " is a list, each item on its line after a -";
  const YamlNode* node = ask(key, absent, sentence);
  if (node == nullptr) return nullptr;
  if (node->kind == YamlNode::Kind::list && (absent.allowed || !node->items.empty())) return node;
  if (node->kind == YamlNode::Kind::null && absent.allowed) return nullptr;
  findings_->fault(node->at, path(key), node->kind == YamlNode::Kind::list ? "is empty" : what_it_is(*node),
                   sentence);
  return nullptr;
}

std::vector<const YamlNode*> MapReader::scalars(std::string_view key, std::string_view noun,
                                                const KeyDescription& description) {
  describe(key, description.unit, description.standard, description.allowed, {});
  const YamlNode* node = ask(key, {}, "");
  std::vector<const YamlNode*> values;
  if (node == nullptr) return values;
  if (node->kind == YamlNode::Kind::scalar) return {node};
  if (node->kind == YamlNode::Kind::list && !node->items.empty()) {
    for (const YamlNode& item : node->items)
      values.push_back(&item);
  } else {
    findings_->fault(node->at, path(key), node->kind == YamlNode::Kind::list ? "is empty" : what_it_is(*node),
                     std::string(noun));
  }
  return values;
}

const YamlNode* MapReader::free_map(std::string_view key, std::string_view noun,
                                    const KeyDescription& description) {
  describe(key, description.unit, description.standard, description.allowed, {});
  const YamlNode* node = ask(key, {}, "");
  if (node == nullptr || node->kind == YamlNode::Kind::map) return node;
  findings_->fault(node->at, path(key), what_it_is(*node), std::string(noun));
  return nullptr;
}

void MapReader::refuse_other_keys() {
  if (map_ == nullptr) return;
  for (const YamlNode::Key& key : map_->keys) {
    if (std::find(known_.begin(), known_.end(), key.name) != known_.end()) continue;
    const std::string_view near = nearest_word(key.name, known_);
    std::string allowed;
    if (near.empty()) {
      for (const std::string_view known : known_)
        allowed += (allowed.empty() ? "known here: " : ", ") + std::string(known);
    } else {
      allowed = "did you mean " + std::string(near) + "?";
    }
    findings_->fault(key.at, path(shown(key.name)), "is not a key here", std::move(allowed));
  }
}

void MapReader::fault(std::string_view key, std::string what, std::string allowed) {
  findings_->fault(at(key), path(key), std::move(what), std::move(allowed));
}

void MapReader::fault_here(std::string what, std::string allowed) {
  findings_->fault(at_, path_, std::move(what), std::move(allowed));
}

void MapReader::fault_at(Position at, std::string path, std::string what, std::string allowed) {
  findings_->fault(at, std::move(path), std::move(what), std::move(allowed));
}

void MapReader::remark(std::string_view key, std::string what, std::string advice) {
  findings_->remark(at(key), path(key), std::move(what), std::move(advice));
}

}  // namespace tramline::config
