#include "config/nearest_word.hpp"

#include <algorithm>
#include <array>
#include <cstddef>

namespace tramline::config {
namespace {

constexpr std::size_t kLongest = 64;

char lower(char c) {
  return c >= 'A' && c <= 'Z' ? static_cast<char>(c - 'A' + 'a') : c;
}

/// Optimal string alignment distance; both at most kLongest.
std::size_t distance(std::string_view a, std::string_view b) {
  std::array<std::array<std::size_t, kLongest + 1>, 3> rows{};
  for (std::size_t j = 0; j <= b.size(); ++j)
    rows[0][j] = j;
  for (std::size_t i = 1; i <= a.size(); ++i) {
    auto& row = rows[i % 3];
    const auto& above = rows[(i - 1) % 3];
    row[0] = i;
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const bool same = lower(a[i - 1]) == lower(b[j - 1]);
      row[j] = std::min({above[j] + 1, row[j - 1] + 1, above[j - 1] + (same ? 0U : 1U)});
      if (i > 1 && j > 1 && lower(a[i - 1]) == lower(b[j - 2]) && lower(a[i - 2]) == lower(b[j - 1])) {
        row[j] = std::min(row[j], rows[(i - 2) % 3][j - 2] + 1);
      }
    }
  }
  return rows[a.size() % 3][b.size()];
}

bool is_stem_of(std::string_view stem, std::string_view word) {
  return stem.size() >= 2 && word.size() > stem.size() && word.substr(0, stem.size()) == stem &&
         word[stem.size()] == '_';
}

}  // namespace

std::string_view nearest_word(std::string_view word, const std::vector<std::string_view>& candidates) {
  if (word.empty() || word.size() > kLongest) return {};
  std::string_view nearest;
  std::size_t least = std::max<std::size_t>(1, word.size() / 3) + 1;
  for (const std::string_view candidate : candidates) {
    if (candidate.size() > kLongest) continue;
    const std::size_t d = distance(word, candidate);
    if (d < least) {
      least = d;
      nearest = candidate;
    }
  }
  if (!nearest.empty()) return nearest;
  for (const std::string_view candidate : candidates) {
    if (is_stem_of(word, candidate) || is_stem_of(candidate, word)) return candidate;
  }
  return {};
}

}  // namespace tramline::config
