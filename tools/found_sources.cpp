#include "tools/found_sources.hpp"

#include <algorithm>
#include <filesystem>
#include <fstream>
#include <set>
#include <string_view>
#include <system_error>

namespace tramline::tools {
namespace {

namespace fs = std::filesystem;

constexpr std::size_t kMostEntries = 256;

/// Names in a folder, sorted; none if it cannot be read.
std::vector<std::string> names_in(const fs::path& folder) {
  std::vector<std::string> names;
  std::error_code error;
  for (fs::directory_iterator it(folder, error), end; !error && it != end && names.size() < kMostEntries;
       it.increment(error))
    names.push_back(it->path().filename().string());
  std::sort(names.begin(), names.end());
  return names;
}

bool begins_with(const std::string& text, std::string_view with) {
  return text.compare(0, with.size(), with) == 0;
}

std::string first_line(const fs::path& file) {
  std::ifstream in(file);
  std::string line;
  std::getline(in, line);
  return line;
}

void add_serial(const fs::path& root, std::vector<FoundSource>& found) {
  std::set<std::string> named;  // ports that have a lasting name
  for (const std::string& name : names_in(root / "dev/serial/by-id")) {
    std::error_code error;
    const std::string port = fs::read_symlink(root / "dev/serial/by-id" / name, error).filename().string();
    if (!error) named.insert(port);
    found.push_back({"serial", "/dev/serial/by-id/" + name, port.empty() ? name : "now " + port});
  }
  for (const std::string& name : names_in(root / "dev")) {
    if ((begins_with(name, "ttyACM") || begins_with(name, "ttyUSB")) && named.count(name) == 0)
      found.push_back({"serial", "/dev/" + name, "a USB serial port"});
  }
}

void add_iio(const fs::path& root, std::vector<FoundSource>& found) {
  for (const std::string& id : names_in(root / "sys/bus/iio/devices")) {
    if (!begins_with(id, "iio:device")) continue;
    const std::string name = first_line(root / "sys/bus/iio/devices" / id / "name");
    // The name outlives the number, but two converters may share it.
    const bool shared = std::any_of(found.begin(), found.end(), [&](const FoundSource& f) {
      return f.kind == "iio" && f.device == name;
    });
    found.push_back(
        {"iio", name.empty() || shared ? id : name, name.empty() ? "an IIO device" : name + ", " + id});
  }
}

/// Lines of /proc/asound/cards: " 1 [CODEC          ]: USB-Audio - its name", each followed by one that says
/// where.
void add_sound(const fs::path& root, std::vector<FoundSource>& found) {
  std::ifstream in(root / "proc/asound/cards");
  std::string line;
  for (std::size_t n = 0; n < kMostEntries && std::getline(in, line); ++n) {
    const std::size_t open = line.find(" [");
    const std::size_t close = line.find("]:");
    if (open == std::string::npos || close == std::string::npos || close < open) continue;
    std::string id = line.substr(open + 2, close - open - 2);
    id.erase(id.find_last_not_of(' ') + 1);
    const std::size_t dash = line.find(" - ", close);
    if (!id.empty())
      found.push_back({"sound", "hw:CARD=" + id, dash == std::string::npos ? id : line.substr(dash + 3)});
  }
}

}  // namespace

std::vector<FoundSource> found_sources(const std::string& root) {
  std::vector<FoundSource> found;
  add_serial(root, found);
  add_iio(root, found);
  add_sound(root, found);
  return found;
}

}  // namespace tramline::tools
