#pragma once

#include <cstddef>
#include <string>
#include <string_view>

namespace tramline::tools {

/// `text` broken at spaces into lines of at most 96 characters, each indented by `indent` spaces and ended by
/// a newline.
[[nodiscard]] std::string indented(std::string_view text, std::size_t indent);

}  // namespace tramline::tools
