#pragma once

#include <cstddef>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "config/fault.hpp"

namespace tramline::config {

/// A value of a YAML file with its place. A plain tree: no aliases, no tags, keys are scalars in the file's
/// order, and a key that stands twice is in it twice.
struct YamlNode {
  enum class Kind { null, scalar, list, map };
  struct Key {
    std::string name;
    Position at;
  };

  Kind kind = Kind::null;
  Position at;                  ///< a null that is the value of a key stands where the key does
  bool quoted = false;          ///< scalar: written in quotes or as a block, so a text and never a number
  std::string text;             ///< scalar
  std::vector<Key> keys;        ///< map: keys[i] names items[i]
  std::vector<YamlNode> items;  ///< list, map
};

/// yaml-cpp may take 250 bytes of memory for one byte of text made to exhaust it.
inline constexpr std::size_t kLargestFileBytes = 256 * 1024;
inline constexpr std::size_t kDeepestNesting = 16;
inline constexpr std::size_t kMostValues = 20'000;

/// Reads one YAML document. Columns of the nodes and of the faults count bytes here; `count_characters()`
/// turns them into characters. An empty document is a null node at 1:1.
///
/// Nothing comes back, and `findings` says why, if the text is larger than kLargestFileBytes, is no UTF-8,
/// holds control characters, is indented with tabs, is no YAML, nests deeper than kDeepestNesting, holds more
/// than kMostValues values or more than one document, or uses anchors, aliases or tags. Throws nothing but
/// std::bad_alloc.
std::optional<YamlNode> read_yaml(std::string_view text, Findings& findings);

/// Sorts `faults` by place and turns their columns from bytes of `text` into characters.
void count_characters(std::string_view text, std::vector<Fault>& faults);

}  // namespace tramline::config
