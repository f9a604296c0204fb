#pragma once

#include <string>
#include <vector>

namespace tramline::tools {

/// Something on this machine that may give samples.
struct FoundSource {
  std::string kind;    ///< of source, as the site file has it
  std::string device;  ///< what the site file's `source.device` would be
  std::string what;    ///< as the machine calls it
};

/// Serial ports (by their lasting names where they have one), IIO converters and sound interfaces under
/// `root`, "/" or a made-up tree. Opens no device; what cannot be read is left out.
[[nodiscard]] std::vector<FoundSource> found_sources(const std::string& root);

}  // namespace tramline::tools
