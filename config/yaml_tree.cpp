#include "config/yaml_tree.hpp"

#include <yaml-cpp/eventhandler.h>
#include <yaml-cpp/exceptions.h>
#include <yaml-cpp/mark.h>
#include <yaml-cpp/parser.h>

#include <algorithm>
#include <cstddef>
#include <cstdio>
#include <sstream>
#include <tuple>
#include <utility>

namespace tramline::config {
namespace {

constexpr std::string_view kByteOrderMark = "\xEF\xBB\xBF";

std::string_view without_byte_order_mark(std::string_view text) {
  if (text.substr(0, kByteOrderMark.size()) == kByteOrderMark) text.remove_prefix(kByteOrderMark.size());
  return text;
}

/// How many bytes the UTF-8 character at the begin of `text` has (RFC 3629, clause 4); 0: it is none.
std::size_t utf8_length(std::string_view text) {
  const auto byte = [&](std::size_t i) { return i < text.size() ? static_cast<unsigned char>(text[i]) : 0U; };
  const auto follows = [&](std::size_t i) { return byte(i) >= 0x80U && byte(i) <= 0xBFU; };
  const unsigned first = byte(0);
  const unsigned second = byte(1);
  if (first < 0x80U) return 1;
  if (first < 0xC2U || first > 0xF4U || !follows(1)) return 0;
  if (first < 0xE0U) return 2;
  if (first < 0xF0U) {
    const bool overlong = first == 0xE0U && second < 0xA0U;
    const bool surrogate = first == 0xEDU && second > 0x9FU;
    return follows(2) && !overlong && !surrogate ? 3 : 0;
  }
  const bool overlong = first == 0xF0U && second < 0x90U;
  const bool beyond = first == 0xF4U && second > 0x8FU;
  return follows(2) && follows(3) && !overlong && !beyond ? 4 : 0;
}

/// Looks for what YAML readers answer with a riddle, or not at all: wrong encodings, control characters,
/// tabs.
void check_characters(std::string_view text, Findings& findings) {
  Position at{1, 1};
  bool indenting = true;
  bool tab = false;
  Position tab_at;
  for (std::size_t i = 0; i < text.size();) {
    const char c = text[i];
    const std::size_t length = utf8_length(text.substr(i));
    if (length == 0) {
      findings.fault(at, "", "the file is not UTF-8 here", "save it with the encoding UTF-8");
      return;  // in another encoding every further byte may be wrong
    }
    if ((static_cast<unsigned char>(c) < 0x20 && c != '\t' && c != '\n' && c != '\r') || c == 0x7F) {
      char code[8];
      std::snprintf(code, sizeof code, "0x%02X", static_cast<unsigned>(static_cast<unsigned char>(c)));
      findings.fault(at, "", std::string("the file holds the control character ") + code,
                     "a site file is plain text in UTF-8");
      return;
    }
    if (c == '\n') {
      at = {at.line + 1, 1};
      indenting = true;
      tab = false;
      ++i;
      continue;
    }
    if (indenting && c == '\t' && !tab) {
      tab = true;
      tab_at = at;
    }
    if (indenting && c != ' ' && c != '\t') {
      if (tab && c != '#' && c != '\r') {
        findings.fault(tab_at, "", "this line is indented with a tab", "indent with spaces");
      }
      indenting = false;
    }
    at.column += static_cast<int>(length);
    i += length;
  }
}

/// Leaves yaml-cpp's parser from within a callback: there is no other way out. Caught in read_yaml().
struct Refused {
  Fault fault;
};

[[noreturn]] void refuse(Position at, std::string what, std::string allowed) {
  throw Refused{{at, "", std::move(what), std::move(allowed)}};
}

Position position(const YAML::Mark& mark) {
  return mark.is_null() ? Position{} : Position{mark.line + 1, mark.column + 1};
}

/// Whether the quoted scalar at `begin` has its closing quote. yaml-cpp takes the end of the file for one.
bool quote_is_closed(std::string_view text, std::size_t begin) {
  if (begin >= text.size() || (text[begin] != '"' && text[begin] != '\'')) return true;  // a block scalar
  const char quote = text[begin];
  for (std::size_t i = begin + 1; i < text.size(); ++i) {
    if (text[i] == '\\' && quote == '"') {
      ++i;
    } else if (text[i] == quote) {
      if (quote == '"' || i + 1 >= text.size() || text[i + 1] != quote) return true;
      ++i;  // '' within single quotes is one quote
    }
  }
  return false;
}

class TreeBuilder : public YAML::EventHandler {
 public:
  void OnDocumentStart(const YAML::Mark& mark) override {
    if (++documents_ > 1)
      refuse(position(mark), "a second document begins here", "a site file is one document");
  }
  void OnDocumentEnd() override {}
  void OnNull(const YAML::Mark& mark, YAML::anchor_t anchor) override {
    add(YamlNode::Kind::null, mark, anchor, "?");
  }
  void OnAlias(const YAML::Mark& mark, YAML::anchor_t /*anchor*/) override { refuse_anchor(position(mark)); }
  void OnScalar(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                const std::string& value) override {
    add(YamlNode::Kind::scalar, mark, anchor, tag, value);
  }
  void OnSequenceStart(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                       YAML::EmitterStyle::value style) override {
    open(YamlNode::Kind::list, mark, anchor, tag, style);
  }
  void OnMapStart(const YAML::Mark& mark, const std::string& tag, YAML::anchor_t anchor,
                  YAML::EmitterStyle::value style) override {
    open(YamlNode::Kind::map, mark, anchor, tag, style);
  }
  void OnSequenceEnd() override { close(); }
  void OnMapEnd() override { close(); }

  /// `text` is what is being parsed.
  explicit TreeBuilder(std::string_view text) : text_(text) {
    root_.at = {1, 1};  // stays so if the file is empty
  }

  [[nodiscard]] YamlNode take_root() { return std::move(root_); }

  /// The innermost bracket or brace that is still open; line 0 if none is.
  [[nodiscard]] Position open_bracket() const {
    for (auto level = open_.rbegin(); level != open_.rend(); ++level) {
      if (level->in_brackets) return level->node.at;
    }
    return {};
  }

 private:
  struct Level {
    YamlNode node;
    bool in_brackets = false;
    bool key_awaits_value = false;
  };

  [[noreturn]] static void refuse_anchor(Position at) {
    refuse(at, "an anchor (&) or alias (*) stands here",
           "write the value out, or in quotes if it begins with & or *");
  }

  YamlNode begin(YamlNode::Kind kind, const YAML::Mark& mark, YAML::anchor_t anchor, const std::string& tag) {
    const Position at = position(mark);
    if (anchor != YAML::NullAnchor) refuse_anchor(at);
    if (tag != "?" && tag != "!" && !tag.empty()) {
      refuse(at, "the tag " + shown(tag) + " stands here", "write the value without a tag");
    }
    if (++values_ > kMostValues) {
      refuse(at, "the file holds more than " + std::to_string(kMostValues) + " values",
             "a site file is far smaller");
    }
    if (tag == "!" && mark.pos >= 0 && !quote_is_closed(text_, static_cast<std::size_t>(mark.pos))) {
      refuse(at, "this quote is never closed", "close it with the same sign");
    }
    YamlNode node;
    node.kind = kind;
    node.at = at;
    node.quoted = tag == "!";
    return node;
  }

  void add(YamlNode::Kind kind, const YAML::Mark& mark, YAML::anchor_t anchor, const std::string& tag,
           const std::string& value = {}) {
    YamlNode node = begin(kind, mark, anchor, tag);
    node.text = value;
    attach(std::move(node));
  }

  void open(YamlNode::Kind kind, const YAML::Mark& mark, YAML::anchor_t anchor, const std::string& tag,
            YAML::EmitterStyle::value style) {
    YamlNode node = begin(kind, mark, anchor, tag);
    if (open_.size() == kDeepestNesting) {
      refuse(node.at, "the file nests deeper than " + std::to_string(kDeepestNesting) + " levels",
             "a site file is far flatter");
    }
    open_.push_back({std::move(node), style == YAML::EmitterStyle::Flow});
  }

  void close() {
    YamlNode node = std::move(open_.back().node);
    open_.pop_back();
    attach(std::move(node));
  }

  void attach(YamlNode node) {
    if (open_.empty()) {
      root_ = std::move(node);
      return;
    }
    Level& level = open_.back();
    if (level.node.kind == YamlNode::Kind::map && !level.key_awaits_value) {
      if (node.kind != YamlNode::Kind::scalar) refuse(node.at, "a key is missing here", "write key: value");
      level.node.keys.push_back({std::move(node.text), node.at});
      level.key_awaits_value = true;
      return;
    }
    // yaml-cpp finds that a value is missing only at the next line, which would mislead.
    if (level.key_awaits_value && node.kind == YamlNode::Kind::null) node.at = level.node.keys.back().at;
    level.key_awaits_value = false;
    level.node.items.push_back(std::move(node));
  }

  std::string_view text_;
  int documents_ = 0;
  std::size_t values_ = 0;
  YamlNode root_;
  std::vector<Level> open_;
};

}  // namespace

std::optional<YamlNode> read_yaml(std::string_view text, Findings& findings) {
  if (text.size() > kLargestFileBytes) {
    findings.fault({}, "", "the file is larger than " + std::to_string(kLargestFileBytes) + " bytes",
                   "a site file is far smaller");
    return std::nullopt;
  }
  text = without_byte_order_mark(text);
  const std::size_t before = findings.faults.size();
  check_characters(text, findings);
  if (findings.faults.size() > before) return std::nullopt;

  TreeBuilder builder(text);
  try {
    std::istringstream stream{std::string(text)};
    YAML::Parser parser(stream);
    while (parser.HandleNextDocument(builder)) {
    }
  } catch (const Refused& refused) {
    findings.faults.push_back(refused.fault);
    return std::nullopt;
  } catch (const YAML::Exception& syntax) {
    const bool in_brackets =
        syntax.msg == YAML::ErrorMsg::END_OF_SEQ_FLOW || syntax.msg == YAML::ErrorMsg::END_OF_MAP_FLOW;
    const Position bracket = builder.open_bracket();
    if (in_brackets && bracket.line > 0) {
      // Where yaml-cpp gave up may be far from the slip, and at the end of the file it is 1:1.
      const int line = std::max(bracket.line, position(syntax.mark).line);
      findings.fault(bracket, "", "what this bracket opens breaks off in line " + std::to_string(line),
                     "close it with ] or }, and part its items by commas");
    } else {
      findings.fault(position(syntax.mark), "", "this is not YAML: " + shown(syntax.msg),
                     "look at colons, quotes, brackets and indentation here and in the line above");
    }
    return std::nullopt;
  }
  return builder.take_root();
}

void count_characters(std::string_view text, std::vector<Fault>& faults) {
  std::stable_sort(faults.begin(), faults.end(), [](const Fault& a, const Fault& b) {
    return std::tie(a.at.line, a.at.column) < std::tie(b.at.line, b.at.column);
  });
  text = without_byte_order_mark(text);
  std::size_t offset = 0;
  int line = 1;
  int bytes = 1;
  int characters = 1;
  for (Fault& fault : faults) {
    while (offset < text.size() && line < fault.at.line) {
      if (text[offset++] == '\n') {
        ++line;
        bytes = characters = 1;
      }
    }
    if (line != fault.at.line) continue;
    while (offset < text.size() && bytes < fault.at.column) {
      ++offset;
      ++bytes;
      const bool character_begins =
          offset >= text.size() || (static_cast<unsigned char>(text[offset]) & 0xC0U) != 0x80U;
      if (character_begins) ++characters;
    }
    fault.at.column = characters;
  }
}

}  // namespace tramline::config
