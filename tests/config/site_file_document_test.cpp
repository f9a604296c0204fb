#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <algorithm>
#include <cctype>
#include <filesystem>
#include <fstream>
#include <map>
#include <sstream>
#include <string>
#include <string_view>
#include <vector>

#include "config/site_file.hpp"
#include "site_texts.hpp"

/// SITE-FILE.md and the examples against the parser.
namespace tramline::config {
namespace {

const std::filesystem::path kConfig = std::filesystem::path(TRAMLINE_SOURCE_DIR) / "config";

std::string trimmed(std::string text) {
  text.erase(0, std::min(text.find_first_not_of(' '), text.size()));
  text.erase(text.find_last_not_of(' ') + 1);
  return text;
}

/// The cells of each table row of the document whose first cell fits.
template <class Fits>
std::vector<std::vector<std::string>> rows_of_document(Fits fits) {
  std::ifstream document(kConfig / "SITE-FILE.md");
  EXPECT_TRUE(document.good());
  std::vector<std::vector<std::string>> rows;
  for (std::string line; std::getline(document, line);) {
    if (line.size() < 2 || line.front() != '|' || line.back() != '|') continue;
    std::istringstream rest(line.substr(1));
    std::vector<std::string> cells;
    for (std::string cell; std::getline(rest, cell, '|');)
      cells.push_back(trimmed(cell));
    if (fits(cells)) rows.push_back(cells);
  }
  return rows;
}

TEST(SiteFileDocument, ListsEveryKeyTheParserKnowsWithItsUnitDefaultAndLimitsAndNoOther) {
  std::vector<std::string> documented;
  for (const auto& row :
       rows_of_document([](const auto& cells) { return cells.size() == 5 && cells[0].front() == '`'; })) {
    EXPECT_FALSE(row[1].empty()) << row[0] << " has no meaning";
    documented.push_back(row[0] + " | " + row[2] + " | " + row[3] + " | " + row[4]);
  }
  std::vector<std::string> known;
  for (const KeyDescription& key : site_file_keys()) {
    known.push_back("`" + key.path + "` | " + key.unit + " | " + key.standard + " | " + key.allowed);
  }
  EXPECT_THAT(documented, testing::UnorderedElementsAreArray(known));
  EXPECT_GT(known.size(), 60U);
}

/// The keys in backquotes in a cell.
std::vector<std::string> keys_in(const std::string& cell) {
  std::vector<std::string> keys;
  for (std::size_t at = cell.find('`'); at != std::string::npos; at = cell.find('`', at)) {
    const std::size_t end = cell.find('`', at + 1);
    keys.push_back(cell.substr(at + 1, end - at - 1));
    at = end + 1;
  }
  return keys;
}

TEST(SiteFileDocument, TellsWhatEachHappeningOfTheScriptTakes) {
  const std::map<std::string, std::string> values = {
      {"lasting", "5s"}, {"to_pct", "50"}, {"to_v", "200"},    {"to_a", "3"},    {"ramp", "1s"},
      {"ratio", "1.1"},  {"factor", "2"},  {"phase_deg", "9"}, {"phases", "L1"},
  };
  const auto accepted = [&](const std::string& what, const std::vector<std::string>& keys) {
    std::string line = "at: 1s, what: " + what;
    for (const std::string& key : keys) {
      std::string value = values.at(key);
      if (key == "to_pct" && what == "swell") value = "120";
      if (key == "factor" && what == "servo_slow") value = "0.5";
      line += ", " + key + ": " + value;
    }
    return parse_site(site_with_source("{kind: simulator, script: [{" + line + "}]}"), "f").ok();
  };

  const auto rows = rows_of_document(
      [](const auto& cells) { return cells.size() == 4 && cells[0] != "what" && cells[0][0] != '-'; });
  EXPECT_EQ(rows.size(), 11U);
  for (const auto& row : rows) {
    const std::string& what = row[0];
    const std::vector<std::string> needed = keys_in(row[2]);
    std::vector<std::string> all = needed;
    for (const std::string& key : keys_in(row[3]))
      all.push_back(key);
    EXPECT_TRUE(accepted(what, needed)) << what;
    EXPECT_TRUE(accepted(what, all)) << what;
    for (const std::string& left_out : needed) {
      std::vector<std::string> rest = needed;
      std::erase(rest, left_out);
      EXPECT_FALSE(accepted(what, rest)) << what << " without " << left_out;
    }
    for (const auto& [key, value] : values) {
      if (std::find(all.begin(), all.end(), key) != all.end()) continue;
      std::vector<std::string> more = all;
      more.push_back(key);
      EXPECT_FALSE(accepted(what, more)) << what << " with " << key;
    }
  }
}

/// The text of the first block ```yaml in the document.
std::string first_yaml_block() {
  std::ifstream document(kConfig / "SITE-FILE.md");
  std::stringstream all;
  all << document.rdbuf();
  const std::string text = all.str();
  const std::string_view fence = "```yaml\n";
  const std::size_t begin = text.find(fence) + fence.size();
  return text.substr(begin, text.find("```", begin) - begin);
}

TEST(SiteFileDocument, ShowsASiteThatIsSound) {
  const SiteFile file = parse_site(first_yaml_block(), "SITE-FILE.md");
  EXPECT_TRUE(file.ok()) << file.fault_text();
}

TEST(SiteFileDocument, ShowsFaultsAsTheParserTellsThem) {
  const SiteFile file =
      parse_site(kLeastSite + std::string(9, '\n') + "events:\n  sag_pct: 101\n  swel_pct: 3\n", "site.yaml");
  std::ifstream document(kConfig / "SITE-FILE.md");
  std::stringstream all;
  all << document.rdbuf();
  EXPECT_THAT(all.str(), testing::HasSubstr("```\n" + file.fault_text() + "```"));
}

class Example : public testing::TestWithParam<std::string> {};

TEST_P(Example, IsSoundAndRunsAnywhere) {
  const SiteFile file = read_site_file((kConfig / "examples" / GetParam()).string());
  ASSERT_TRUE(file.ok()) << file.fault_text();
  EXPECT_EQ(file.remark_text(), "");
  EXPECT_TRUE(std::holds_alternative<SimulatorSettings>(file.site->source));
  EXPECT_TRUE(file.site->has(Side::input) && file.site->has(Side::output));
  EXPECT_TRUE(file.site->regulator.has_value());
}

std::vector<std::string> example_names() {
  std::vector<std::string> names;
  for (const auto& entry : std::filesystem::directory_iterator(kConfig / "examples")) {
    names.push_back(entry.path().filename().string());
  }
  std::sort(names.begin(), names.end());
  return names;
}

std::string test_name(const testing::TestParamInfo<std::string>& example) {
  std::string name = example.param;
  std::replace_if(
      name.begin(), name.end(), [](unsigned char c) { return std::isalnum(c) == 0; }, '_');
  return name;
}

INSTANTIATE_TEST_SUITE_P(Examples, Example, testing::ValuesIn(example_names()), test_name);

TEST(Examples, TheUnsteadyDayIsTheFirstRunsDay) {
  const SiteFile file = read_site_file((kConfig / "examples/unsteady-day.yaml").string());
  ASSERT_TRUE(file.ok()) << file.fault_text();
  EXPECT_EQ(file.site->nominal_v, 220.0);
  EXPECT_EQ(file.site->regulator->band_low_v, 215.0);
  EXPECT_EQ(file.site->regulator->band_high_v, 225.0);
  const auto& simulator = std::get<SimulatorSettings>(file.site->source);
  EXPECT_FALSE(simulator.real_time);
  EXPECT_EQ(simulator.run_for_s, 24.0 * 3600.0);
  const auto stuck = std::find_if(
      simulator.script.begin(), simulator.script.end(),
      [](const ScriptedHappening& h) { return h.what == ScriptedHappening::What::servo_stuck_at; });
  ASSERT_NE(stuck, simulator.script.end());
  EXPECT_EQ(stuck->ratio, 1.17);  // 220 V / 188 V: common practice, no source
}

}  // namespace
}  // namespace tramline::config
