#include "config/site_file.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <filesystem>
#include <fstream>
#include <string>
#include <variant>

#include "site_texts.hpp"

namespace tramline::config {
namespace {

using testing::ElementsAre;
using testing::HasSubstr;
using testing::Pair;

Site site_of(const std::string& text) {
  SiteFile file = parse_site(text, "site.yaml");
  EXPECT_TRUE(file.ok()) << file.fault_text();
  return file.site.value_or(Site{});
}

TEST(SiteFile, LeavesEveryDefaultToTheStructs) {
  const Site site = site_of(kLeastSite);
  const Site standard;
  EXPECT_EQ(site.name, "Test");
  EXPECT_EQ(site.nominal_v, 230.0);
  EXPECT_EQ(site.nominal_hz, 50.0);
  EXPECT_EQ(site.zone, standard.zone);
  EXPECT_EQ(site.phases, standard.phases);
  EXPECT_FALSE(site.regulator.has_value());
  EXPECT_EQ(site.events.sag_pct, standard.events.sag_pct);
  EXPECT_EQ(site.events.swell_pct, standard.events.swell_pct);
  EXPECT_EQ(site.events.interruption_pct, standard.events.interruption_pct);
  EXPECT_EQ(site.events.hysteresis_pct, standard.events.hysteresis_pct);
  EXPECT_EQ(site.capture.longest_ms, standard.capture.longest_ms);
  EXPECT_EQ(site.logbook.size_budget_mb, standard.logbook.size_budget_mb);
  EXPECT_EQ(site.logbook.path, "");
  EXPECT_EQ(site.text, kLeastSite);

  const ChannelSettings channel;
  ASSERT_EQ(site.channels.size(), 2U);
  EXPECT_EQ(site.channels[0].channel, (Channel{Side::input, Phase::l1}));
  EXPECT_EQ(site.channels[1].channel, (Channel{Side::output, Phase::l1}));
  EXPECT_EQ(site.channels[0].scale, channel.scale);
  EXPECT_EQ(site.channels[0].source_channel, "");

  const SimulatorSettings simulator;
  const auto& read = std::get<SimulatorSettings>(site.source);
  EXPECT_EQ(read.rate_hz, simulator.rate_hz);
  EXPECT_EQ(read.real_time, simulator.real_time);
  EXPECT_FALSE(read.begin.has_value());
  EXPECT_EQ(read.run_for_s, 0.0);
  EXPECT_EQ(read.grid.harmonics_pct, simulator.grid.harmonics_pct);
  EXPECT_EQ(read.servo.speed_v_per_s, simulator.servo.speed_v_per_s);
  EXPECT_TRUE(read.script.empty());
}

TEST(SiteFile, ReadsEveryKeyOfTheSiteItself) {
  const Site site = site_of(R"(
site: {name: "Würth & Söhne, hall 2", zone: Asia/Kolkata, nominal_v: 240.5, frequency_hz: 60, phases: 1}
channels:
  - {side: output, phase: L1, source_channel: Ua, scale: -325.5, offset: 0.25, range_v: 425}
  - {side: input, source_channel: 2}
regulator: {target_v: 235, band_v: [230, 240], ratio: [0.8, 1.4], speed_v_per_s: 20, response_s: 0.1, grace_s: 2}
events: {sag_pct: 85, swell_pct: 112, interruption_pct: 1, hysteresis_pct: 1.5}
capture: {before_ms: 50, after_ms: 150, longest_ms: 3000, per_day_mb: 7}
logbook:
  path: /var/lib/x.logbook
  size_budget_mb: 100
  keep_three_seconds_days: 1
  keep_ten_seconds_days: 2
  keep_waveforms_days: 3
  keep_corrections_days: 0
source: {kind: recording}
)");
  EXPECT_EQ(site.name, "Würth & Söhne, hall 2");
  EXPECT_EQ(site.zone, "Asia/Kolkata");
  EXPECT_EQ(site.nominal_v, 240.5);
  EXPECT_EQ(site.nominal_hz, 60.0);
  ASSERT_EQ(site.channels.size(), 2U);
  EXPECT_EQ(site.channels[0].source_channel, "2");
  EXPECT_EQ(site.channels[1].source_channel, "Ua");
  EXPECT_EQ(site.channels[1].scale, -325.5);
  EXPECT_EQ(site.channels[1].offset, 0.25);
  EXPECT_EQ(site.channels[1].range_v, 425.0);
  ASSERT_TRUE(site.regulator.has_value());
  EXPECT_EQ(site.regulator->target_v, 235.0);
  EXPECT_EQ(site.regulator->band_low_v, 230.0);
  EXPECT_EQ(site.regulator->band_high_v, 240.0);
  EXPECT_EQ(site.regulator->ratio_min, 0.8);
  EXPECT_EQ(site.regulator->ratio_max, 1.4);
  EXPECT_EQ(site.regulator->speed_v_per_s, 20.0);
  EXPECT_EQ(site.regulator->response_s, 0.1);
  EXPECT_EQ(site.regulator->grace_s, 2.0);
  EXPECT_EQ(site.events.sag_pct, 85.0);
  EXPECT_EQ(site.events.swell_pct, 112.0);
  EXPECT_EQ(site.events.interruption_pct, 1.0);
  EXPECT_EQ(site.events.hysteresis_pct, 1.5);
  EXPECT_EQ(site.capture.before_ms, 50.0);
  EXPECT_EQ(site.capture.after_ms, 150.0);
  EXPECT_EQ(site.capture.longest_ms, 3000.0);
  EXPECT_EQ(site.capture.per_day_mb, 7.0);
  EXPECT_EQ(site.logbook.path, "/var/lib/x.logbook");
  EXPECT_EQ(site.logbook.size_budget_mb, 100.0);
  EXPECT_EQ(site.logbook.keep_three_seconds_days, 1.0);
  EXPECT_EQ(site.logbook.keep_ten_seconds_days, 2.0);
  EXPECT_EQ(site.logbook.keep_waveforms_days, 3.0);
  EXPECT_EQ(site.logbook.keep_corrections_days, 0.0);
}

TEST(SiteFile, ReadsEveryKeyOfTheSimulator) {
  const Site site = site_of(site_with_source(R"(
  kind: simulator
  rate_hz: 12800
  seed: 18446744073709551615
  real_time: false
  begin: 2026-03-01T06:00:00+05:30
  run_for: 1d
  grid:
    voltage_v: 225
    wander_pct: 1
    noise_v: 0.1
    frequency_drift_hz: 0.01
    sensor_noise_v: 0
    harmonics_pct: {2: 0.5, 11: 3}
  servo:
    target_v: 231
    comparator_v: [228, 234]
    ratio: [0.9, 1.2]
    speed_v_per_s: 30
    sense_filter_s: 0.2
    coast_s: 0.03
    output_impedance_ohm: 0.5
    load_a: 7
    load_step_a: 0
    load_step_every_s: 60
  script:
    - {at: 1h, what: level, to_v: 190, ramp: 2s, lasting: 10m}
    - {at: 2s, what: sag, to_pct: 70, lasting: 200ms, phase_deg: 90, phases: [L1]}
    - {at: 90m, what: servo_stuck_at, ratio: 1.17}
    - {at: 100m, what: servo_slow, factor: 0.5, lasting: 5m, phases: L1}
    - {at: 2h, what: load_step, to_a: 20}
)"));
  const auto& simulator = std::get<SimulatorSettings>(site.source);
  EXPECT_EQ(simulator.rate_hz, 12800.0);
  EXPECT_EQ(simulator.seed, 18446744073709551615U);
  EXPECT_FALSE(simulator.real_time);
  EXPECT_EQ(simulator.begin, UtcNs{1'772'325'000 * kNsPerSecond});
  EXPECT_EQ(simulator.run_for_s, 86400.0);
  EXPECT_EQ(simulator.grid.voltage_v, 225.0);
  EXPECT_EQ(simulator.grid.wander_pct, 1.0);
  EXPECT_EQ(simulator.grid.noise_v, 0.1);
  EXPECT_EQ(simulator.grid.frequency_drift_hz, 0.01);
  EXPECT_EQ(simulator.grid.sensor_noise_v, 0.0);
  EXPECT_THAT(simulator.grid.harmonics_pct, ElementsAre(Pair(2, 0.5), Pair(11, 3.0)));
  EXPECT_EQ(simulator.servo.target_v, 231.0);
  EXPECT_EQ(simulator.servo.comparator_low_v, 228.0);
  EXPECT_EQ(simulator.servo.comparator_high_v, 234.0);
  EXPECT_EQ(simulator.servo.ratio_min, 0.9);
  EXPECT_EQ(simulator.servo.ratio_max, 1.2);
  EXPECT_EQ(simulator.servo.speed_v_per_s, 30.0);
  EXPECT_EQ(simulator.servo.sense_filter_s, 0.2);
  EXPECT_EQ(simulator.servo.coast_s, 0.03);
  EXPECT_EQ(simulator.servo.output_impedance_ohm, 0.5);
  EXPECT_EQ(simulator.servo.load_a, 7.0);
  EXPECT_EQ(simulator.servo.load_step_a, 0.0);
  EXPECT_EQ(simulator.servo.load_step_every_s, 60.0);

  using What = ScriptedHappening::What;
  ASSERT_EQ(simulator.script.size(), 5U);
  EXPECT_EQ(simulator.script[0].what, What::sag);  // sorted by begin
  EXPECT_EQ(simulator.script[0].at_s, 2.0);
  EXPECT_EQ(simulator.script[0].to_pct, 70.0);
  EXPECT_EQ(simulator.script[0].lasting_s, 0.2);
  EXPECT_EQ(simulator.script[0].phase_deg, 90.0);
  EXPECT_THAT(simulator.script[0].phases, ElementsAre(Phase::l1));
  EXPECT_EQ(simulator.script[1].what, What::level);
  EXPECT_EQ(simulator.script[1].to_v, 190.0);
  EXPECT_EQ(simulator.script[1].ramp_s, 2.0);
  EXPECT_EQ(simulator.script[1].lasting_s, 600.0);
  EXPECT_EQ(simulator.script[2].ratio, 1.17);
  EXPECT_EQ(simulator.script[2].lasting_s, 0.0);
  EXPECT_EQ(simulator.script[3].factor, 0.5);
  EXPECT_THAT(simulator.script[3].phases, ElementsAre(Phase::l1));
  EXPECT_EQ(simulator.script[4].to_a, 20.0);
}

TEST(SiteFile, ReadsEveryKeyOfARecording) {
  const Site site = site_of(site_with_source(
      "{kind: recording, path: mains.csv, format: csv, begin: 2026-03-01T00:30:00Z, time_column: t}"));
  const auto& recording = std::get<RecordingSettings>(site.source);
  EXPECT_EQ(recording.path, "mains.csv");
  EXPECT_EQ(recording.format, RecordingFormat::csv);
  EXPECT_EQ(recording.begin, UtcNs{1'772'325'000 * kNsPerSecond});
  EXPECT_EQ(recording.time_column, "t");
  EXPECT_FALSE(recording.rate_hz.has_value());
  EXPECT_FALSE(recording.primary);

  const Site with_rate = site_of(site_with_source("{kind: recording, rate_hz: 6400, primary: true}"));
  EXPECT_EQ(std::get<RecordingSettings>(with_rate.source).rate_hz, 6400.0);
  EXPECT_TRUE(std::get<RecordingSettings>(with_rate.source).primary);
}

TEST(SiteFile, DerivesBandAndRatioFromPercentAndInputRange) {
  const Site site = site_of(kLeastSite + "regulator: {target_v: 220, band_pct: 2.5, input_v: [160, 275]}\n");
  ASSERT_TRUE(site.regulator.has_value());
  EXPECT_DOUBLE_EQ(site.regulator->band_low_v, 214.5);
  EXPECT_DOUBLE_EQ(site.regulator->band_high_v, 225.5);
  EXPECT_DOUBLE_EQ(site.regulator->ratio_min, 0.8);
  EXPECT_DOUBLE_EQ(site.regulator->ratio_max, 1.375);
}

TEST(SiteFile, PutsInputsBeforeOutputsAndPhasesInOrder) {
  const Site site =
      site_of(three_phases_with("  - {side: output, phase: L2}\n"
                                "  - {side: input, phase: L3}\n"
                                "  - {side: output, phase: L1}\n"
                                "  - {side: input, phase: L1}\n"
                                "  - {side: output, phase: L3}\n"
                                "  - {side: input, phase: L2}\n"));
  std::string order;
  for (const ChannelSettings& c : site.channels) {
    order += std::string(name_of(c.channel.side)) + std::string(name_of(c.channel.phase)) + " ";
  }
  EXPECT_EQ(order, "inputL1 inputL2 inputL3 outputL1 outputL2 outputL3 ");
}

TEST(SiteFile, TakesASiteWithOneSideOnly) {
  for (const char* side : {"input", "output"}) {
    const Site site = site_of(
        "site: {name: Test, nominal_v: 230, frequency_hz: 50}\n"
        "channels: [{side: " +
        std::string(side) +
        "}]\n"
        "source: {kind: simulator}\n");
    EXPECT_NE(site.has(Side::input), site.has(Side::output));
  }
}

TEST(SiteFile, TakesSectionsThatAreThereButEmpty) {
  EXPECT_TRUE(parse_site(kLeastSite + "events:\ncapture: {}\nlogbook: ~\n", "site.yaml").ok());
}

TEST(SiteFile, TakesByteOrderMarkAndWindowsLineEnds) {
  std::string text = "\xEF\xBB\xBF" + kLeastSite;
  for (std::size_t at = 0; (at = text.find('\n', at)) != std::string::npos; at += 2)
    text.replace(at, 1, "\r\n");
  EXPECT_EQ(site_of(text).name, "Test");
}

TEST(SiteFile, TakesNoHarmonicsAtAll) {
  const Site site = site_of(site_with_source("{kind: simulator, grid: {harmonics_pct: {}}}"));
  EXPECT_TRUE(std::get<SimulatorSettings>(site.source).grid.harmonics_pct.empty());
}

TEST(SiteFile, ResolvesRelativePathsFromTheFolderOfTheFile) {
  const std::string text =
      site_with_source("{kind: recording, path: ../mains.wav}") + "logbook: {path: a.logbook}\n";
  const SiteFile file = parse_site(text, "/etc/sites/here/site.yaml");
  ASSERT_TRUE(file.ok()) << file.fault_text();
  EXPECT_EQ(std::get<RecordingSettings>(file.site->source).path, "/etc/sites/mains.wav");
  EXPECT_EQ(file.site->logbook.path, "/etc/sites/here/a.logbook");

  const SiteFile bare = parse_site(text, "site.yaml");
  ASSERT_TRUE(bare.ok()) << bare.fault_text();
  EXPECT_EQ(bare.site->logbook.path, "a.logbook");
}

TEST(SiteFile, RemarksOnWhatIsAllowedButPerhapsNotMeant) {
  const SiteFile file = parse_site(site_with_source("\n"
                                                    "  kind: simulator\n"
                                                    "  run_for: 1h\n"
                                                    "  script: [{at: 2h, what: interruption, lasting: 1s}]") +
                                       "events: {sag_pct: 98}\n",
                                   "site.yaml");
  ASSERT_TRUE(file.ok()) << file.fault_text();
  EXPECT_EQ(
      file.remark_text(),
      "site.yaml:3:38: regulator.band_pct reaches beyond the sag and swell thresholds (225.4 V to 253 V); an "
      "output in its band may then count as a sag or a swell\n"
      "site.yaml:7:17: source.script[1].at lies at or after the end of the simulation (run_for is 1 h); it "
      "will "
      "not happen\n");
  const SiteFile mismatched =
      parse_site(kLeastSite + "regulator: {target_v: 230, band_pct: 2, ratio: [0.5, 0.9]}\n", "site.yaml");
  ASSERT_TRUE(mismatched.ok());
  EXPECT_THAT(mismatched.remark_text(), HasSubstr("site.yaml:4:48: regulator.ratio makes 115 V to 207 V"));
}

TEST(ReadSiteFile, ReadsFromTheDiskAndKeepsTheText) {
  const std::string path = testing::TempDir() + "/tramline_read_site_file.yaml";
  std::ofstream(path) << kLeastSite;
  const SiteFile file = read_site_file(path);
  std::filesystem::remove(path);
  ASSERT_TRUE(file.ok()) << file.fault_text();
  EXPECT_EQ(file.site->text, kLeastSite);
}

TEST(ReadSiteFile, SaysWhyAFileCannotBeRead) {
  const std::string folder = testing::TempDir();
  EXPECT_THAT(read_site_file(folder + "/no/such/site.yaml").fault_text(),
              HasSubstr("/no/such/site.yaml: cannot be opened: No such file or directory; "));
  EXPECT_THAT(read_site_file(folder).fault_text(), HasSubstr(": cannot be read: Is a directory; "));
  EXPECT_FALSE(read_site_file("").ok());
}

}  // namespace
}  // namespace tramline::config
