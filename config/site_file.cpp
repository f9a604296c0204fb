#include "config/site_file.hpp"

#include <cerrno>
#include <cstdio>
#include <filesystem>
#include <iterator>
#include <memory>
#include <system_error>
#include <utility>

#include "config/calibration_file.hpp"
#include "config/result.hpp"
#include "config/site_sections.hpp"
#include "config/source_sections.hpp"
#include "config/yaml_tree.hpp"

namespace tramline::config {
namespace {

/// A path in the file, seen from the program: relative ones begin in the site file's folder.
void resolve(std::string& path, const std::filesystem::path& folder) {
  if (!path.empty()) path = (folder / path).lexically_normal().string();
}

void read_site(MapReader& root, Site& site) {
  MapReader site_section = root.section("site", kRequired);
  SoundFigures sound = read_site_section(site_section, site);
  read_channels(root, site, sound);
  MapReader events = root.section("events");
  read_events(events, site.events);
  MapReader regulator = root.section("regulator");
  if (regulator.is_there() || root.is_describing()) sound.regulator = read_regulator(regulator, site, sound);
  MapReader capture = root.section("capture");
  read_capture(capture, site.capture);
  MapReader logbook = root.section("logbook");
  read_logbook(logbook, site.logbook);
  MapReader clock = root.section("clock");
  read_clock(clock, site.clock);
  MapReader source = root.section("source", kRequired);
  read_source(source, site, sound);
  root.refuse_other_keys();
}

struct Close {
  void operator()(std::FILE* file) const { std::fclose(file); }
};

/// The error's `where` is empty if there is no such file, else `path`.
Result<std::string> read_text(const std::string& path, const std::string& noun) {
  errno = 0;
  const std::unique_ptr<std::FILE, Close> file(std::fopen(path.c_str(), "rb"));
  if (!file) {
    const bool none = errno == ENOENT || errno == ENOTDIR;
    return Error{none ? "" : path, "cannot be opened: " + std::generic_category().message(errno),
                 "give the path of " + noun + " that may be read"};
  }
  // One byte more than is allowed tells a file that is too large, also where no size can be asked for (a
  // pipe).
  std::string text(kLargestFileBytes + 1, '\0');
  errno = 0;
  text.resize(std::fread(text.data(), 1, text.size(), file.get()));
  if (std::ferror(file.get()) != 0) {
    return Error{path, "cannot be read: " + std::generic_category().message(errno),
                 "give the path of " + noun};
  }
  return text;
}

/// Puts the calibration at `path`, if there is one, into the site. Its faults stand behind the site file's.
void add_calibration(SiteFile& file, const std::string& path) {
  const Result<std::string> text = read_text(path, "a calibration file");
  if (!text && text.error().where.empty()) return;
  Findings findings;
  if (!text) {
    findings.faults.push_back({{}, "", text.error().what, "make it readable, or remove it", path});
  } else if (file.ok()) {
    calibrate(*file.site, text.value(), path, findings);
  } else {
    (void)parse_calibration(text.value(), path, findings);
  }
  if (!findings.faults.empty()) file.site.reset();
  std::move(findings.faults.begin(), findings.faults.end(), std::back_inserter(file.faults));
}

}  // namespace

std::string SiteFile::lines(const std::vector<Fault>& findings) const {
  std::string text;
  for (const Fault& finding : findings)
    text += finding.text(file_name) + "\n";
  return text;
}

SiteFile parse_site(std::string_view text, std::string_view file_name) {
  SiteFile file;
  file.file_name = file_name;
  Findings findings;
  Site site;
  if (const std::optional<YamlNode> tree = read_yaml(text, findings)) {
    if (tree->kind == YamlNode::Kind::null) {
      findings.fault(tree->at, "", "the file holds no site",
                     "it needs the sections site, channels and source");
    } else {
      MapReader root(*tree, "", findings);
      if (root.is_there()) read_site(root, site);
    }
  }
  count_characters(text, findings.faults);
  count_characters(text, findings.remarks);
  file.faults = std::move(findings.faults);
  file.remarks = std::move(findings.remarks);
  if (!file.faults.empty()) return file;

  const std::filesystem::path folder = std::filesystem::path(file_name).parent_path();
  resolve(site.logbook.path, folder);
  if (auto* recording = std::get_if<RecordingSettings>(&site.source)) resolve(recording->path, folder);
  site.text = text;
  file.site = std::move(site);
  return file;
}

SiteFile read_site_file(const std::string& path) {
  const Result<std::string> text = read_text(path, "a site file");
  if (!text) {
    SiteFile failed;
    failed.file_name = path;
    failed.faults.push_back({{}, "", text.error().what, text.error().remedy});
    return failed;
  }
  SiteFile file = parse_site(text.value(), path);
  add_calibration(file, calibration_path(path));
  return file;
}

std::vector<KeyDescription> site_file_keys() {
  Findings nothing_found;
  std::vector<KeyDescription> keys;
  Site site;
  MapReader root = MapReader::describing("", nothing_found, keys);
  read_site(root, site);
  return keys;
}

}  // namespace tramline::config
