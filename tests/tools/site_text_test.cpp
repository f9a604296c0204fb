#include "tools/site_text.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <string>

#include "config/site_file.hpp"

namespace tramline::tools {
namespace {

using ::testing::HasSubstr;

SiteAnswers household() {
  SiteAnswers answers;
  answers.name = "Fernhollow 12";
  answers.zone = "Asia/Kolkata";
  answers.nominal_v = 230.0;
  answers.regulator = SiteAnswers::Regulator{230.0, 3.0, std::nullopt, {170.0, 270.0}, 25.0};
  answers.source = "simulator";
  answers.logbook = "fernhollow.logbook";
  return answers;
}

std::string faults_of(const SiteAnswers& answers) {
  return config::parse_site(site_text(answers), "new.yaml").fault_text();
}

TEST(SiteText, SaysWhatTheAnswersSay) {
  const auto file = config::parse_site(site_text(household()), "folder/new.yaml");
  ASSERT_TRUE(file.ok()) << file.fault_text();
  const config::Site& site = *file.site;
  EXPECT_EQ(site.name, "Fernhollow 12");
  EXPECT_EQ(site.zone, "Asia/Kolkata");
  EXPECT_EQ(site.nominal_v, 230.0);
  EXPECT_EQ(site.channels.size(), 2U);
  ASSERT_TRUE(site.regulator);
  EXPECT_NEAR(site.regulator->band_low_v, 223.1, 1e-9);
  EXPECT_NEAR(site.regulator->ratio_max, 230.0 / 170.0, 1e-9);
  EXPECT_EQ(site.regulator->speed_v_per_s, 25.0);
  EXPECT_EQ(site.logbook.path, "folder/fernhollow.logbook");
}

TEST(SiteText, PassesTheCheckForEveryPracticeSideAndPhase) {
  for (const SupplyPractice& practice : supply_practices()) {
    for (const int phases : {1, 3}) {
      for (const std::vector<Side>& sides :
           {std::vector<Side>{Side::input, Side::output}, {Side::input}, {Side::output}}) {
        SiteAnswers answers = household();
        answers.nominal_v = practice.nominal_v;
        answers.nominal_hz = practice.nominal_hz;
        answers.phases = phases;
        answers.sides = sides;
        const double v = practice.nominal_v;
        answers.regulator = SiteAnswers::Regulator{
            v, std::nullopt, std::pair(0.97 * v, 1.03 * v), {0.75 * v, 1.2 * v}, std::nullopt};
        EXPECT_EQ(faults_of(answers), "") << practice.where;
        answers.regulator.reset();
        EXPECT_EQ(faults_of(answers), "") << practice.where;
      }
    }
  }
}

TEST(SiteText, PassesTheCheckForEveryKindOfSourceWithTheKeysItNeeds) {
  for (const SourceKind& kind : source_kinds()) {
    SiteAnswers answers = household();
    answers.source = kind.kind;
    for (const std::string key : kind.keys)
      answers.source_keys.emplace_back(key, key == "port"                   ? "5020"
                                            : answers.source == "recording" ? "mains.wav"
                                            : answers.source == "sound"     ? "hw:CARD=CODEC"
                                                                            : "/dev/ttyUSB0");
    if (kind.registers) answers.source_channels = {"input:0:f32", "input:2:f32"};
    EXPECT_EQ(faults_of(answers), "") << kind.kind;
    // A recording's path may also be given to an import; the daemon needs it here.
    if (kind.keys.empty() || answers.source == "recording") continue;
    answers.source_keys.pop_back();
    EXPECT_NE(faults_of(answers), "") << kind.kind << " can do without its last key: do not ask for it";
  }
}

TEST(SiteText, KnowsEveryKindTheSiteFileKnows) {
  for (const auto& key : config::site_file_keys()) {
    if (key.path != "source.kind") continue;
    for (const SourceKind& kind : source_kinds())
      EXPECT_THAT(key.allowed, HasSubstr(kind.kind));
    EXPECT_EQ(static_cast<std::size_t>(std::count(key.allowed.begin(), key.allowed.end(), ',')) + 1,
              source_kinds().size());
  }
}

TEST(SiteText, AwkwardNamesStayWhatTheyAre) {
  for (const std::string name :
       {"The \"Mill\": no. 7 # east", "{a: b}", "- x", "null", "Straße 5 \\ 6", "2026-01-01", "'"}) {
    SiteAnswers answers = household();
    answers.name = name;
    const auto file = config::parse_site(site_text(answers), "new.yaml");
    ASSERT_TRUE(file.ok()) << name << ": " << file.fault_text();
    EXPECT_EQ(file.site->name, name);
  }
}

TEST(SiteText, CarriesTheCautionsNextToTheSensors) {
  const std::string text = site_text(household());
  for (const char* words : {"mains voltage kills", "licensed", "local codes", "CAT III", "NOT isolate"})
    EXPECT_THAT(text, HasSubstr(words));
  EXPECT_LT(text.find("mains voltage kills"), text.find("channels:"));
}

}  // namespace
}  // namespace tramline::tools
