#pragma once

#include <string>
#include <string_view>
#include <utility>
#include <vector>

namespace tramline::config {

/// A place in a text file, counted from 1; columns count characters, as an editor does. Line 0: the file as a
/// whole.
struct Position {
  int line = 0;
  int column = 0;
};

/// One thing that is wrong in a site file, and what would be right.
struct Fault {
  Position at;
  std::string
      path;  ///< the key, such as `events.sag_pct` or `channels[2].scale` (list items count from 1); or empty
  std::string what;       ///< reads on from the path: "is 101"
  std::string allowed;    ///< "a sag threshold lies between 1 and 100 percent of nominal_v"
  std::string file = {};  ///< where it is not in the site file itself but in one beside it

  /// "site.yaml:14:11: events.sag_pct is 101; a sag threshold lies between 1 and 100 percent of nominal_v";
  /// `file_name` is the site file's.
  [[nodiscard]] std::string text(std::string_view file_name) const;
};

/// What one reading of a site file turned up. Faults forbid the file; remarks are advice only.
struct Findings {
  std::vector<Fault> faults;
  std::vector<Fault> remarks;

  void fault(Position at, std::string path, std::string what, std::string allowed) {
    faults.push_back({at, std::move(path), std::move(what), std::move(allowed), {}});
  }
  void remark(Position at, std::string path, std::string what, std::string allowed) {
    remarks.push_back({at, std::move(path), std::move(what), std::move(allowed), {}});
  }
};

/// `text` for a message on one line: control characters become '?', and what goes beyond 60 bytes is cut.
std::string shown(std::string_view text);

}  // namespace tramline::config
