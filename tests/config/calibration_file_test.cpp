#include "config/calibration_file.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <filesystem>
#include <fstream>
#include <sstream>
#include <string>
#include <vector>

#include "config/site_file.hpp"
#include "site_texts.hpp"

namespace tramline::config {
namespace {

namespace fs = std::filesystem;
using ::testing::HasSubstr;

/// The least an entry needs.
const std::string kLeastEntry =
    "  - side: input\n"
    "    phase: L1\n"
    "    date: 2026-03-01T00:00:00Z\n"
    "    site_scale: 1\n"
    "    gain: 1.01\n"
    "    expanded_pct: 0.5\n"
    "    expanded_v: 0.1\n"
    "    reference: bench meter\n";
const std::string kLeast = "calibrations:\n" + kLeastEntry;

std::string faults_of(const std::string& text) {
  Findings findings;
  (void)parse_calibration(text, "c.yaml", findings);
  std::string lines;
  for (const Fault& fault : findings.faults)
    lines += fault.text("site.yaml") + "\n";
  return lines;
}

ChannelCalibration full_entry() {
  ChannelCalibration c;
  c.channel = {Side::output, Phase::l3};
  c.date = {1'772'323'200'123'456'789};
  c.site_scale = -0.1;
  c.site_offset = 1e-7;
  c.gain = 0.98765432;
  c.offset_v = -0.1 + 0.3;  // a double whose shortest text is long
  c.expanded_pct = 0.51;
  c.expanded_v = 0.02;
  c.k = 2.1;
  c.offset_expanded_v = 0.05;
  c.reference = "\"six and a half\" digits \\ certificate: #12, ° and 'so on'";
  c.reference_expanded_pct = 0.5;
  c.reference_expanded_v = 0.25;
  c.reference_k = 2.0;
  c.reference_date = UtcNs{1'760'000'000 * kNsPerSecond};
  c.due = c.date + 365 * 86400 * kNsPerSecond;
  c.temperature_c = -12.5;
  c.temperature_coefficient_ppm_per_k = 50.0;
  c.temperature_span_k = 20.0;
  c.note = "- not a list: {nor a map}";
  c.readings = {{CalibrationReading::Kind::ac, 228.4, 230.1}, {CalibrationReading::Kind::dc, -0.42, 0.0}};
  return c;
}

TEST(CalibrationFile, WhatIsWrittenIsReadBackToTheLastBit) {
  const ChannelCalibration c = full_entry();
  const std::string text = calibration_text({c});
  Findings findings;
  const Calibration calibration = parse_calibration(text, "c.yaml", findings);
  ASSERT_TRUE(findings.faults.empty()) << faults_of(text);
  EXPECT_EQ(calibration.text, text);
  const ChannelCalibration* read = calibration.of(c.channel);
  ASSERT_NE(read, nullptr);
  EXPECT_EQ(calibration.of({Side::input, Phase::l3}), nullptr);
  EXPECT_EQ(read->date, c.date);
  EXPECT_EQ(read->site_scale, c.site_scale);
  EXPECT_EQ(read->site_offset, c.site_offset);
  EXPECT_EQ(read->gain, c.gain);
  EXPECT_EQ(read->offset_v, c.offset_v);
  EXPECT_EQ(read->expanded_pct, c.expanded_pct);
  EXPECT_EQ(read->expanded_v, c.expanded_v);
  EXPECT_EQ(read->k, c.k);
  EXPECT_EQ(read->offset_expanded_v, c.offset_expanded_v);
  EXPECT_EQ(read->reference, c.reference);
  EXPECT_EQ(read->reference_expanded_pct, c.reference_expanded_pct);
  EXPECT_EQ(read->reference_expanded_v, c.reference_expanded_v);
  EXPECT_EQ(read->reference_date, c.reference_date);
  EXPECT_EQ(read->due, c.due);
  EXPECT_EQ(read->temperature_c, c.temperature_c);
  EXPECT_EQ(read->temperature_coefficient_ppm_per_k, c.temperature_coefficient_ppm_per_k);
  EXPECT_EQ(read->temperature_span_k, c.temperature_span_k);
  EXPECT_EQ(read->note, c.note);
  ASSERT_EQ(read->readings.size(), 2U);
  EXPECT_EQ(read->readings[1].kind, CalibrationReading::Kind::dc);
  EXPECT_EQ(read->readings[1].shown_v, -0.42);
  EXPECT_EQ(calibration_text(calibration.channels), text);
}

TEST(CalibrationFile, AllFaultsAreToldAtOnceWithTheirPlaces) {
  const std::string faults = faults_of(
      "calibrations:\n"
      "  - side: imput\n"
      "    phase: L1\n"
      "    date: yesterday\n"
      "    site_scale: 0\n"
      "    gain: 2\n"
      "    expanded_pct: -1\n"
      "    reference: x\n"
      "    exspanded_v: 1\n");
  EXPECT_THAT(faults, HasSubstr("c.yaml:2:11: calibrations[1].side is imput; "));
  EXPECT_THAT(faults, HasSubstr("did you mean input?"));
  EXPECT_THAT(faults, HasSubstr("c.yaml:4:11: calibrations[1].date is yesterday"));
  EXPECT_THAT(faults, HasSubstr("c.yaml:6:11: calibrations[1].gain is 2; a gain lies between 0.8 and 1.2"));
  EXPECT_THAT(faults, HasSubstr("c.yaml:7:19: calibrations[1].expanded_pct is -1"));
  EXPECT_THAT(faults, HasSubstr("calibrations[1].expanded_v is missing"));
  EXPECT_THAT(
      faults,
      HasSubstr("c.yaml:9:5: calibrations[1].exspanded_v is not a key here; did you mean expanded_v?"));
}

TEST(CalibrationFile, ValuesThatContradictEachOtherAreFaults) {
  const struct {
    const char* line;
    const char* words;
  } cases[] = {
      {"    due: 2026-02-01T00:00:00Z\n", "due is not after date"},
      {"    reference_date: 2026-04-01T00:00:00Z\n", "reference_date is after date"},
      {"    readings: [{shown_v: 1}]\n", "reference_v is missing"},
      {"    k: 0.5\n", "a coverage factor"},
  };
  EXPECT_EQ(faults_of(kLeast), "");
  for (const auto& [line, words] : cases)
    EXPECT_THAT(faults_of(kLeast + line), HasSubstr(words));
  EXPECT_THAT(faults_of(kLeast + kLeastEntry),
              HasSubstr("c.yaml:10:5: calibrations[2] is input L1, which stands in "
                        "line 2 already"));
  EXPECT_THAT(faults_of(""), HasSubstr("holds no calibration"));
  EXPECT_THAT(faults_of("calibrations: []\n"), HasSubstr("is empty"));
  EXPECT_THAT(faults_of("- a\n"), HasSubstr("c.yaml:1:1"));
}

TEST(CalibrationFile, StandsBesideTheSiteFile) {
  EXPECT_EQ(calibration_path("/etc/plant.yaml"), "/etc/plant.calibration.yaml");
  EXPECT_EQ(calibration_path("plant.yml"), "plant.calibration.yaml");
  EXPECT_EQ(calibration_path("plant.v2"), "plant.v2.calibration.yaml");
  EXPECT_EQ(calibration_path("plant"), "plant.calibration.yaml");
}

TEST(Calibration, GoesIntoScaleOffsetAndRange) {
  ChannelSettings settings;
  settings.scale = -2.5;
  settings.offset = 3.0;
  settings.range_v = 400.0;
  ChannelCalibration c;
  c.gain = 1.02;
  c.offset_v = -4.0;
  const ChannelSettings own = settings;
  apply(c, settings);
  for (const double raw : {-100.0, -3.0, 0.0, 0.5, 92.0}) {
    const double wanted = ((raw + own.offset) * own.scale + c.offset_v) * c.gain;
    EXPECT_NEAR((raw + settings.offset) * settings.scale, wanted, 1e-10 * (1.0 + std::abs(wanted)));
  }
  EXPECT_NEAR(settings.range_v, 396.0 * 1.02, 1e-9);  // where the nearer of the sensor's two limits is
  settings = own;
  settings.range_v = 0.0;
  apply(c, settings);
  EXPECT_EQ(settings.range_v, 0.0);  // none stays none
}

TEST(Calibration, ItsUncertaintyHasAPartThatShrinksWithTheVoltageAndOneThatDoesNot) {
  ChannelCalibration c;
  c.expanded_pct = 0.5;
  c.expanded_v = 0.3;
  EXPECT_DOUBLE_EQ(expanded_v_at(c, 0.0), 0.3);
  EXPECT_DOUBLE_EQ(expanded_v_at(c, 230.0), std::hypot(1.15, 0.3));
}

TEST(Calibration, RemindsOnlyOfWhatIsPastDue) {
  Calibration calibration;
  ChannelCalibration c = full_entry();
  c.date = {0};
  c.due = UtcNs{86400 * kNsPerSecond};
  calibration.channels.push_back(c);
  c.due.reset();
  c.channel.phase = Phase::l1;
  calibration.channels.push_back(c);
  EXPECT_TRUE(due_reminders(calibration, UtcNs{86400 * kNsPerSecond - 1}, "UTC").empty());
  EXPECT_THAT(due_reminders(calibration, UtcNs{86400 * kNsPerSecond}, "UTC"),
              testing::ElementsAre("the calibration of output L3 of 1970-01-01 was due again on 1970-01-02"));
}

// ---- with the site file -------------------------------------------------------------------------------

class SiteWithCalibration : public ::testing::Test {
 protected:
  SiteWithCalibration() {
    const auto* test = ::testing::UnitTest::GetInstance()->current_test_info();
    folder_ = fs::path(::testing::TempDir()) / (std::string("tramline-calibration-") + test->name());
    fs::remove_all(folder_);
    fs::create_directories(folder_);
    write("plant.yaml", kLeastSite);
  }
  ~SiteWithCalibration() override { fs::remove_all(folder_); }

  void write(const std::string& name, const std::string& text) { std::ofstream(folder_ / name) << text; }
  [[nodiscard]] SiteFile read() const { return read_site_file((folder_ / "plant.yaml").string()); }

  fs::path folder_;
};

TEST_F(SiteWithCalibration, IsPickedUpIfItIsThere) {
  SiteFile file = read();
  ASSERT_TRUE(file.ok());
  EXPECT_TRUE(file.site->calibration.text.empty());
  EXPECT_EQ(file.site->channels[0].scale, 1.0);
  write("plant.calibration.yaml", kLeast);
  file = read();
  ASSERT_TRUE(file.ok()) << file.fault_text();
  EXPECT_EQ(file.site->channels[0].scale, 1.01);
  EXPECT_EQ(file.site->channels[1].scale, 1.0);
  EXPECT_EQ(file.site->text, kLeastSite);  // the site file's own
  EXPECT_EQ(file.site->calibration.text, kLeast);
  EXPECT_NE(file.site->calibration.of({Side::input, Phase::l1}), nullptr);
}

TEST_F(SiteWithCalibration, ItsFaultsAreFaultsOfTheSiteUnderTheirOwnFileName) {
  write("plant.calibration.yaml", "calibrations: 3\n");
  SiteFile file = read();
  EXPECT_FALSE(file.ok());
  EXPECT_THAT(file.fault_text(),
              HasSubstr((folder_ / "plant.calibration.yaml").string() + ":1:15: calibrations is 3"));
  // Both files' at once.
  write("plant.yaml", "site: {name: X, nominal_v: 0}\n");
  file = read();
  EXPECT_THAT(file.fault_text(), HasSubstr("plant.yaml:1:"));
  EXPECT_THAT(file.fault_text(), HasSubstr("plant.calibration.yaml:1:15"));
}

TEST_F(SiteWithCalibration, ACalibrationOfAnotherScaleOrChannelIsRefused) {
  write("plant.yaml",
        "site: {name: Test, nominal_v: 230, frequency_hz: 50}\n"
        "channels: [{side: input, scale: 1.5}]\n"
        "source: {kind: simulator}\n");
  write("plant.calibration.yaml", kLeast);
  EXPECT_THAT(read().fault_text(),
              HasSubstr("plant.calibration.yaml:2:5: the calibration of input L1 was made with scale "
                        "1 and offset 0, but the site file now has 1.5 and 0; it holds no more"));
  std::string output = kLeast;
  output.replace(output.find("input"), 5, "output");
  write("plant.calibration.yaml", output);
  EXPECT_THAT(read().fault_text(), HasSubstr("output L1, which is no channel of the site"));
}

TEST_F(SiteWithCalibration, AnOffsetAsLargeAsTheSensorsRangeIsRefused) {
  write("plant.yaml",
        "site: {name: Test, nominal_v: 230, frequency_hz: 50}\n"
        "channels: [{side: input, range_v: 400}]\n"
        "source: {kind: simulator}\n");
  write("plant.calibration.yaml", kLeast + "    offset_v: -400\n");
  EXPECT_THAT(read().fault_text(), HasSubstr("as large as the range_v"));
}

TEST_F(SiteWithCalibration, AFileThatCannotBeReadIsAFaultAndNotNone) {
  fs::create_directories(folder_ / "plant.calibration.yaml");
  EXPECT_THAT(read().fault_text(), HasSubstr("plant.calibration.yaml: cannot be"));
}

// ---- the document ---------------------------------------------------------------------------------------

std::string document() {
  std::ifstream file(fs::path(TRAMLINE_SOURCE_DIR) / "config/CALIBRATION-FILE.md");
  EXPECT_TRUE(file.good());
  std::stringstream all;
  all << file.rdbuf();
  return all.str();
}

TEST(CalibrationFileDocument, ListsEveryKeyWithItsUnitDefaultAndLimitsAndNoOther) {
  std::vector<std::string> known;
  for (const KeyDescription& key : calibration_file_keys())
    known.push_back("| `" + key.path + "` | " + key.unit + " | " + key.standard + " | " + key.allowed + " |");
  std::vector<std::string> documented;
  std::istringstream lines(document());
  for (std::string line; std::getline(lines, line);) {
    if (!line.starts_with("| `")) continue;
    // The second cell is its meaning.
    const std::size_t meaning = line.find('|', 1) + 1;
    const std::size_t end = line.find('|', meaning);
    EXPECT_GT(end - meaning, 5U) << line;
    documented.push_back(line.erase(meaning, end - meaning + 1));
  }
  EXPECT_THAT(documented, testing::UnorderedElementsAreArray(known));
  EXPECT_GT(known.size(), 20U);
}

TEST(CalibrationFileDocument, ShowsAFileThatIsSound) {
  const std::string text = document();
  const std::string fence = "```yaml\n";
  const std::size_t begin = text.find(fence);
  ASSERT_NE(begin, std::string::npos);
  const std::string block =
      text.substr(begin + fence.size(), text.find("```", begin + 3) - begin - fence.size());
  EXPECT_EQ(faults_of(block), "");
}

}  // namespace
}  // namespace tramline::config
