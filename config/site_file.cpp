#include "config/site_file.hpp"

#include <cerrno>
#include <cstdio>
#include <filesystem>
#include <memory>
#include <system_error>
#include <utility>

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
  SiteFile failed;
  failed.file_name = path;
  const auto cannot = [&failed](std::string what, std::string remedy) {
    failed.faults.push_back({{}, "", std::move(what), std::move(remedy)});
    return failed;
  };
  struct Close {
    void operator()(std::FILE* file) const { std::fclose(file); }
  };
  errno = 0;
  const std::unique_ptr<std::FILE, Close> file(std::fopen(path.c_str(), "rb"));
  if (!file) {
    return cannot("cannot be opened: " + std::generic_category().message(errno),
                  "give the path of a site file that may be read");
  }
  // One byte more than is allowed tells a file that is too large, also where no size can be asked for (a
  // pipe).
  std::string text(kLargestFileBytes + 1, '\0');
  errno = 0;
  text.resize(std::fread(text.data(), 1, text.size(), file.get()));
  if (std::ferror(file.get()) != 0) {
    return cannot("cannot be read: " + std::generic_category().message(errno),
                  "give the path of a site file");
  }
  return parse_site(text, path);
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
