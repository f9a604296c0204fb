#pragma once

#include <string>

#include "config/result.hpp"

namespace tramline::tools {

/// Writes `text` to `path` so that a reader, also after a power cut, finds the old file or the new one whole:
/// a new file beside it, synced, then renamed over it, and the folder synced. Permissions of an old file are
/// kept; a symbolic link is followed.
[[nodiscard]] Status replace_file(const std::string& path, const std::string& text);

}  // namespace tramline::tools
