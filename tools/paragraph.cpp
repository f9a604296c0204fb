#include "tools/paragraph.hpp"

namespace tramline::tools {
namespace {

constexpr std::size_t kLineWidth = 96;

}  // namespace

std::string indented(std::string_view text, std::size_t indent) {
  std::string out;
  std::size_t width = kLineWidth;  // full, so that the first word begins a line
  while (!text.empty()) {
    const std::size_t end = std::min(text.find(' '), text.size());
    const std::string_view word = text.substr(0, end);
    text.remove_prefix(std::min(end + 1, text.size()));
    if (word.empty()) continue;
    if (width + 1 + word.size() > kLineWidth) {
      if (!out.empty()) out += '\n';
      out.append(indent, ' ');
      width = indent;
    } else {
      out += ' ';
      ++width;
    }
    out += word;
    width += word.size();
  }
  if (!out.empty()) out += '\n';
  return out;
}

}  // namespace tramline::tools
