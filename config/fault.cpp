#include "config/fault.hpp"

#include <cstddef>

namespace tramline::config {

std::string Fault::text(std::string_view file_name) const {
  std::string line(file.empty() ? file_name : std::string_view(file));
  if (at.line > 0) {
    line += ':';
    line += std::to_string(at.line);
    line += ':';
    line += std::to_string(at.column);
  }
  line += ": ";
  if (!path.empty()) line += path + " ";
  line += what;
  if (!allowed.empty()) line += "; " + allowed;
  return line;
}

std::string shown(std::string_view text) {
  constexpr std::size_t kMost = 60;
  std::size_t end = text.size();
  if (end > kMost) {
    end = kMost;
    // Not in the middle of a character: its further bytes are 10xxxxxx.
    while (end > 0 && (static_cast<unsigned char>(text[end]) & 0xC0U) == 0x80U)
      --end;
  }
  std::string line(text.substr(0, end));
  for (char& c : line) {
    if (static_cast<unsigned char>(c) < 0x20 || c == 0x7F) c = '?';
  }
  if (end < text.size()) line += "...";
  return line;
}

}  // namespace tramline::config
