#pragma once

#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "config/fault.hpp"
#include "config/map_reader.hpp"
#include "config/site.hpp"

namespace tramline::config {

/// A site file that was read: the site, or everything that is wrong with the file. SITE-FILE.md describes its
/// keys.
struct SiteFile {
  std::string file_name;
  std::optional<Site> site;    ///< only if there is no fault
  std::vector<Fault> faults;   ///< all of them, by place; after a YAML syntax error there is only that one
  std::vector<Fault> remarks;  ///< allowed, but perhaps not meant

  [[nodiscard]] bool ok() const { return site.has_value(); }
  /// One line a fault: `file:line:column: what is wrong; what is allowed`.
  [[nodiscard]] std::string fault_text() const { return lines(faults); }
  [[nodiscard]] std::string remark_text() const { return lines(remarks); }

 private:
  [[nodiscard]] std::string lines(const std::vector<Fault>& findings) const;
};

/// Reads the YAML `text` of a site file; `file_name` names it in faults, and relative paths in it begin in
/// its folder. Pure: reads no file and no clock, but asks the time zone database whether `site.zone` is
/// known.
SiteFile parse_site(std::string_view text, std::string_view file_name);

/// The same from the file at `path`, with the calibration of its sensors if there is a calibration file
/// beside it (calibration_file.hpp), whose faults are faults of the site. A file that cannot be read is a
/// fault without a place.
SiteFile read_site_file(const std::string& path);

/// Every key a site file may hold, in the order of SITE-FILE.md.
std::vector<KeyDescription> site_file_keys();

}  // namespace tramline::config
