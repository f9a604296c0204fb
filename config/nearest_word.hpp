#pragma once

#include <string>
#include <string_view>
#include <vector>

namespace tramline::config {

/// The candidate that someone who wrote `word` most likely meant; empty if none is near.
///
/// Near is an edit distance (insert, delete, replace, swap of neighbours; letter case is free) of at most a
/// third of the word's length, or a word that lacks only an ending such as `_pct` or has one too many.
std::string_view nearest_word(std::string_view word, const std::vector<std::string_view>& candidates);

}  // namespace tramline::config
