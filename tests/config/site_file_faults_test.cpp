#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <string>
#include <vector>

#include "config/site_file.hpp"
#include "config/yaml_tree.hpp"
#include "site_texts.hpp"

namespace tramline::config {
namespace {

using testing::HasSubstr;

/// The faults of `text`, each as "line:column path what; allowed".
std::vector<std::string> faults_of(const std::string& text) {
  const SiteFile file = parse_site(text, "f");
  EXPECT_EQ(file.ok(), file.faults.empty());
  std::vector<std::string> lines;
  for (const Fault& fault : file.faults) {
    lines.push_back(fault.text("f").substr(2));
  }
  return lines;
}

/// The one fault of `text`.
std::string fault_of(const std::string& text) {
  const std::vector<std::string> faults = faults_of(text);
  EXPECT_EQ(faults.size(), 1U) << text << testing::PrintToString(faults);
  return faults.empty() ? "" : faults.front();
}

TEST(SiteFileFaults, TellsAllOfAFileAtOnceEachWithItsPlace) {
  const std::string text =
      /*  1 */
      "site:\n"
      /*  2 */
      "  name:\n"
      /*  3 */
      "  zone: Asia/Kolkatta\n"
      /*  4 */
      "  nominal_v: 230 V\n"
      /*  5 */
      "  frequency_hz: 55\n"
      /*  6 */
      "  phase: 1\n"
      /*  7 */
      "channels:\n"
      /*  8 */
      "  - {side: inptu, scale: 0}\n"
      /*  9 */
      "  - {side: output, phase: L2}\n"
      /* 10 */
      "  - {side: output, range_v: -1}\n"
      /* 11 */
      "  - {side: output, größe: \"ö\", offset: [1]}\n"
      /* 12 */
      "events:\n"
      /* 13 */
      "  sag_pct: 101\n"
      /* 14 */
      "  swell_pct: .nan\n"
      /* 15 */
      "  hysteresis_pct: \"2\"\n"
      /* 16 */
      "  sag_pct: 90\n"
      /* 17 */
      "regulator:\n"
      /* 18 */
      "  band_v: [225, 215]\n"
      /* 19 */
      "  ratio: [0.8, 1.2, 1.4]\n"
      /* 20 */
      "  input_v: 170\n"
      /* 21 */
      "capture: 100\n"
      /* 22 */
      "colour: green\n"
      /* 23 */
      "source:\n"
      /* 24 */
      "  kind: simulator\n"
      /* 25 */
      "  real_time: no\n"
      /* 26 */
      "  begin: 2026-03-01\n"
      /* 27 */
      "  run_for: 5 weeks\n"
      /* 28 */
      "  grid: {harmonics_pct: {1: 2, 5: 99}}\n"
      /* 29 */
      "  script:\n"
      /* 30 */
      "    - {at: 1m, what: sag, lasting: 1s, ratio: 2}\n"
      /* 31 */ "    - {what: explosion}\n";
  const std::vector<std::string> expected = {
      "2:3: site.name has no value; a site's name is a text of 1 to 100 characters on one line",
      "3:9: site.zone is Asia/Kolkatta; did you mean Asia/Kolkata?",
      "4:14: site.nominal_v is 230 V; the nominal voltage, phase to neutral, lies between 1 and 100000 V, "
      "written as a "
      "plain number such as 2.5",
      "5:17: site.frequency_hz is 55; the nominal frequency is 50 or 60",
      "6:3: site.phase is not a key here; did you mean phases?",
      "8:12: channels[1].side is inptu; the side of a channel is input or output; did you mean input?",
      "8:26: channels[1].scale is 0; a scale turns what the source gives into volts, so it is not 0",
      "9:27: channels[2].phase is L2 where site.phases is 1; the phase of a single-phase site is L1",
      "10:29: channels[3].range_v is -1; the limit of the sensor lies between 0 and 1000000000 V",
      "11:5: channels[4] is output L1, listed in line 10 already; each channel stands in the list once",
      "11:20: channels[4].größe is not a key here; known here: side, phase, source_channel, "
      "scale, offset, "
      "range_v",
      "11:40: channels[4].offset is a list; the offset lies between -1000000000 and 1000000000 in units of "
      "the source",
      "13:12: events.sag_pct is 101; a sag threshold lies between 1 and 100 percent of nominal_v",
      "14:14: events.swell_pct is .nan; a swell threshold lies between 100 and 200 percent of nominal_v, "
      "written as a "
      "plain number such as 2.5",
      "15:19: events.hysteresis_pct is the text \"2\"; the hysteresis lies between 0 and 10 percent of "
      "nominal_v, written "
      "as a plain number such as 2.5",
      "16:3: events.sag_pct stands here again after line 13; give each key once",
      "18:3: regulator.target_v is missing; the target of a regulator, phase to neutral, lies between 1 and "
      "100000 V",
      "18:11: regulator.band_v is [225, 215]; the first number is the lower one",
      "19:10: regulator.ratio is a list of 3; the ratio of output to input is [lower, higher], two numbers "
      "between 0.01 "
      "and 100",
      "19:10: regulator.ratio stands beside input_v; the range of the regulator is given by input_v or by "
      "ratio, not by "
      "both",
      "20:12: regulator.input_v is 170; the input range is [lower, higher], two numbers between 1 and 100000 "
      "V",
      "21:10: capture is 100; keys with values are expected here, each as key: value",
      "22:1: colour is not a key here; known here: site, channels, events, regulator, capture, "
      "logbook, clock, "
      "source",
      "25:14: source.real_time is no; real_time is true or false",
      "26:10: source.begin is 2026-03-01: the offset from UTC is missing; write a time with its offset from "
      "UTC, such as "
      "2026-03-01T06:00:00+05:30 or 2026-03-01T00:30:00Z",
      "27:12: source.run_for is 5 weeks: the unit is not d, h, m, min, s or ms; the simulated time lies "
      "between 1 s and "
      "3660 d, written such as 2h 5m, 1.5s, 200ms or as seconds",
      "28:26: source.grid.harmonics_pct.1 is not the order of a harmonic; orders are whole numbers between 2 "
      "and 50",
      "28:35: source.grid.harmonics_pct.5 is 99; a harmonic lies between 0 and 50 percent of the fundamental",
      "30:7: source.script[1].to_pct is missing; sag needs it",
      "30:47: source.script[1].ratio has no meaning for sag; sag takes to_pct, lasting, phase_deg, phases",
      "31:7: source.script[2].at is missing; the begin, counted from the begin of the simulation, lies "
      "between 0 s and "
      "3660 d, written such as 2h 5m, 1.5s, 200ms or as seconds",
      "31:14: source.script[2].what is explosion; what happens is sag, swell, interruption, level, "
      "servo_stuck, "
      "servo_stuck_at, servo_slow, servo_reversed, servo_hunting, output_open or load_step",
  };
  EXPECT_EQ(faults_of(text), expected);
}

TEST(SiteFileFaults, NamesTheMissingSections) {
  EXPECT_THAT(
      faults_of("events: {}\n"),
      testing::ElementsAre("1:1: site is missing; this section must be there",
                           "1:1: channels is missing; channels is a list, each item on its line after a -",
                           "1:1: source is missing; this section must be there"));
}

TEST(SiteFileFaults, RefusesWhatIsNoMapOfSections) {
  EXPECT_THAT(fault_of(""), HasSubstr("1:1: the file holds no site"));
  EXPECT_THAT(fault_of("# only a comment\n"), HasSubstr("1:1: the file holds no site"));
  EXPECT_THAT(fault_of("---\n...\n"), HasSubstr("the file holds no site"));
  EXPECT_THAT(fault_of("hello\n"), HasSubstr("1:1: is hello; keys with values are expected here"));
  EXPECT_THAT(fault_of("- site\n"), HasSubstr("1:1: is a list; keys with values"));
}

TEST(SiteFileFaults, TellsValuesThatContradictEachOther) {
  const struct {
    std::string text;
    std::string fault;
  } cases[] = {
      {kLeastSite + "events: {sag_pct: 40, interruption_pct: 40}\n",
       "4:41: events.interruption_pct leaves interruption_pct (40) at or above sag_pct (40)"},
      {kLeastSite + "events: {sag_pct: 5}\n",
       "4:19: events.sag_pct leaves interruption_pct (5) at or above sag_pct (5)"},
      {kLeastSite + "events: {hysteresis_pct: 10}\n",
       "4:26: events.hysteresis_pct leaves no normal voltage between sag_pct + hysteresis_pct (100) and "
       "swell_pct - "
       "hysteresis_pct (100)"},
      {kLeastSite + "events: {sag_pct: 99, swell_pct: 102}\n",
       "4:19: events.sag_pct leaves no normal voltage"},
      {kLeastSite + "regulator: {target_v: 230, band_v: [231, 240], input_v: [170, 270]}\n",
       "4:36: regulator.band_v does not hold target_v (230 V) between its ends"},
      {kLeastSite + "regulator: {target_v: 230, band_v: [220, 230], input_v: [170, 270]}\n",
       "4:36: regulator.band_v does not hold target_v"},
      {kLeastSite + "regulator: {target_v: 230, band_v: [220, 240], band_pct: 2, input_v: [170, 270]}\n",
       "4:36: regulator.band_v stands beside band_pct"},
      {kLeastSite + "regulator: {target_v: 230, input_v: [170, 270]}\n",
       "4:12: regulator.band_pct is missing; the band is given by band_pct or by band_v"},
      {kLeastSite + "regulator: {target_v: 230, band_pct: 2}\n",
       "4:12: regulator.input_v is missing; the range of the regulator is given by input_v or by ratio"},
      {kLeastSite + "regulator: {target_v: 400, band_pct: 2, ratio: [0.8, 1.2]}\n",
       "4:23: regulator.target_v is 400 V at a nominal_v of 230 V"},
      {kLeastSite + "regulator: {target_v: 230, band_pct: 2, ratio: [1.2, 1.2]}\n",
       "4:48: regulator.ratio is [1.2, 1.2]; the first number is the lower one"},
      {kLeastSite + "capture: {before_ms: 300, after_ms: 300, longest_ms: 500}\n",
       "4:54: capture.longest_ms leaves longest_ms (500) below before_ms + after_ms (600)"},
      {site_with_source("{kind: simulator, real_time: false}"),
       "4:38: source.real_time is false without run_for"},
      {site_with_source("{kind: simulator, rate_hz: 1000, grid: {harmonics_pct: {10: 1}}}"),
       "4:65: source.grid.harmonics_pct.10 lies at or above half the sample rate of 1000 Hz"},
      {site_with_source("{kind: simulator, servo: {target_v: 250}}"),
       "4:45: source.servo.target_v leaves the target (250 V) outside the comparator's window"},
      {site_with_source("{kind: simulator, servo: {comparator_v: [231, 240]}}"),
       "4:49: source.servo.comparator_v leaves the target (230 V) outside"},
      {"site: {name: Test, nominal_v: 230, frequency_hz: 50}\nchannels: [{side: input}]\n"
       "source: {kind: simulator, servo: {load_a: 5}}\n",
       "3:34: source.servo describes a servo at a site without a regulator"},
      {"site: {name: Test, nominal_v: 230, frequency_hz: 50}\nchannels: [{side: input}]\n"
       "source: {kind: simulator, script: [{at: 1s, what: servo_stuck}]}\n",
       "3:51: source.script[1].what is servo_stuck at a site without a regulator"},
      {site_with_source("{kind: simulator, script: [{at: 1s, what: sag, to_pct: 100, lasting: 1s}]}"),
       "4:64: source.script[1].to_pct is 100; a sag goes below 100 percent"},
      {site_with_source("{kind: simulator, script: [{at: 1s, what: swell, to_pct: 100, lasting: 1s}]}"),
       "a swell goes above 100 percent"},
      {site_with_source("{kind: simulator, script: [{at: 1s, what: interruption, lasting: 0}]}"),
       "source.script[1].lasting is 0; interruption lasts longer than that"},
      {site_with_source("{kind: simulator, script: [{at: 1s, what: servo_slow, factor: 1}]}"),
       "a slow servo has a factor below 1"},
      {site_with_source("{kind: simulator, script: [{at: 1s, what: servo_hunting, factor: 1}]}"),
       "a hunting servo has a factor above 1"},
      {site_with_source(
           "{kind: simulator, script: [{at: 1s, what: interruption, lasting: 1s, phases: [L1, L1]}]}"),
       "4:91: source.script[1].phases holds L1 twice"},
      {site_with_source("{kind: simulator, script: [{at: 1s, what: interruption, lasting: 1s, phases: L2}]}"),
       "4:86: source.script[1].phases holds L2 where site.phases is 1"},
      {site_with_source("{kind: recording, format: wav, rate_hz: 6400}"),
       "4:49: source.rate_hz has no meaning for this format; it belongs to format: csv"},
      {site_with_source("{kind: recording, format: csv, primary: true}"),
       "4:49: source.primary has no meaning for this format; it belongs to format: comtrade"},
      {site_with_source("{kind: recording, rate_hz: 6400, time_column: t}"),
       "4:55: source.time_column stands beside rate_hz"},
      {site_with_source("{kind: recording, seed: 3}"), "4:27: source.seed is not a key here"},
  };
  for (const auto& c : cases)
    EXPECT_THAT(fault_of(c.text), HasSubstr(c.fault)) << c.text;
}

TEST(SiteFileFaults, TellsChannelsThatDoNotMakeASite) {
  const auto one_phase = [](const std::string& channels) {
    return "site: {name: Test, nominal_v: 230, frequency_hz: 50}\nsource: {kind: simulator}\nchannels: " +
           channels + "\n";
  };
  EXPECT_THAT(fault_of(one_phase("[]")), HasSubstr("3:11: channels is empty"));
  EXPECT_THAT(fault_of(one_phase("")), HasSubstr("3:1: channels has no value"));
  EXPECT_THAT(fault_of(one_phase("input")), HasSubstr("3:11: channels is input; channels is a list"));
  EXPECT_THAT(fault_of(one_phase("[input]")), HasSubstr("3:12: channels[1] is input; keys with values"));
  EXPECT_THAT(fault_of(one_phase("[{phase: L1}]")), HasSubstr("3:12: channels[1].side is missing"));
  EXPECT_THAT(fault_of(one_phase("[{side: input}, {side: input, phase: L1}]")),
              HasSubstr("3:27: channels[2] is input L1, listed in line 3 already"));
  EXPECT_THAT(fault_of(one_phase("[{side: input, source_channel: 0}]")),
              HasSubstr("source channels are counted from 1"));
  EXPECT_THAT(
      fault_of(one_phase("[{side: input, source_channel: 1}, {side: output, source_channel: \"1\"}]")),
      HasSubstr("channels[2].source_channel is 1, taken in line 3 already"));

  EXPECT_THAT(fault_of(three_phases_with("  - {side: input}\n")),
              HasSubstr("4:5: channels[1].phase is missing"));
  EXPECT_THAT(fault_of(three_phases_with("  - {side: input, phase: L1}\n"
                                         "  - {side: input, phase: L2}\n"
                                         "  - {side: input, phase: L3}\n"
                                         "  - {side: output, phase: L2}\n")),
              HasSubstr("4:3: channels lacks output L1 and output L3"));
}

TEST(SiteFileFaults, TakesPlainFiniteDecimalsOnlyForNumbers) {
  for (const char* number : {".nan", "nan", ".inf", "-.inf", "inf", "infinity", "0x64", "1_0", "9,5", "95%",
                             "1e400", "--5", "+-5", "+", "\"95\"", "'95'", "true", "9 5"}) {
    const std::string fault = fault_of(kLeastSite + "events:\n  sag_pct: " + number + "\n");
    EXPECT_THAT(fault, HasSubstr("5:12: events.sag_pct is ")) << number;
    EXPECT_THAT(fault, HasSubstr("written as a plain number")) << number;
  }
  for (const char* number : {"95", "95.0", "+95", "9.5e1", "95."}) {
    const SiteFile file = parse_site(kLeastSite + "events:\n  sag_pct: " + number + "\n", "f");
    ASSERT_TRUE(file.ok()) << number << file.fault_text();
    EXPECT_EQ(file.site->events.sag_pct, 95.0) << number;
  }
  for (const char* seed : {"-1", "1.5", "18446744073709551616", "\"1\"", "one", "[1]"}) {
    EXPECT_THAT(fault_of(site_with_source(std::string("{kind: simulator, seed: ") + seed + "}")),
                HasSubstr("a seed is a whole number between 0 and 18446744073709551615"))
        << seed;
  }
}

TEST(SiteFileFaults, TellsYamlSyntaxErrorsWithTheirPlace) {
  EXPECT_THAT(fault_of("site: {name: a\nchannels: []\n"),
              HasSubstr("1:7: what this bracket opens breaks off in line 2; close it with ] or }"));
  EXPECT_THAT(fault_of("site:\n  name: a: b\n"), HasSubstr("2:10: this is not YAML: illegal map value"));
  EXPECT_THAT(fault_of("site:\n  name: @x\n"), HasSubstr("2:9: this is not YAML: unknown token"));
  EXPECT_THAT(fault_of("site:\n  name: \"x\n"), HasSubstr("2:9: this quote is never closed"));
  EXPECT_THAT(fault_of("site:\n}\n"), HasSubstr("2:1: this is not YAML"));
  EXPECT_THAT(fault_of("%YAML 3.0\n---\nsite: 1\n"), HasSubstr("this is not YAML"));
}

TEST(SiteFileFaults, FindsQuotesThatAreNeverClosed) {
  EXPECT_THAT(fault_of("site:\n  name: 'it''s\n  zone: UTC\n"), HasSubstr("2:9: this quote is never closed"));
  EXPECT_THAT(fault_of("site:\n  name: \"a\\\"\n"), HasSubstr("2:9: this quote is never closed"));
  EXPECT_THAT(fault_of("\"site: 1\n"), HasSubstr("1:1: this quote is never closed"));
  for (const char* name : {"'it''s'", "\"a\\\"b\\\\\"", "''''", "\"'\"", "a'b\"c", "|\n    \"a"}) {
    const SiteFile file =
        parse_site(std::string("channels: [{side: input}]\nsource: {kind: simulator}\n"
                               "site:\n  nominal_v: 230\n  frequency_hz: 50\n  zone: UTC\n  name: ") +
                       name + "\n",
                   "f");
    for (const Fault& fault : file.faults)
      EXPECT_EQ(fault.what.find("quote"), std::string::npos) << name;
  }
}

TEST(SiteFileFaults, RefusesAnchorsAliasesTagsAndSecondDocuments) {
  EXPECT_THAT(fault_of("site: &a {name: x}\n"), HasSubstr("1:7: an anchor (&) or alias (*) stands here"));
  EXPECT_THAT(fault_of("a: &x 1\nb: *x\n"), HasSubstr("1:4: an anchor"));
  EXPECT_THAT(fault_of("site: *a\n"),
              HasSubstr("1:7: this is not YAML: the referenced anchor is not defined"));
  EXPECT_THAT(fault_of("site: !!map {name: x}\n"),
              HasSubstr("1:7: the tag tag:yaml.org,2002:map stands here"));
  EXPECT_THAT(fault_of(kLeastSite + "---\nsite: 2\n"), HasSubstr("4:1: a second document begins here"));
  EXPECT_THAT(fault_of("? [a]\n: 1\n"), HasSubstr("1:3: a key is missing here"));
  EXPECT_THAT(fault_of(": 1\n"), HasSubstr("1:1: a key is missing here"));
}

TEST(SiteFileFaults, RefusesABombOfAliases) {
  std::string bomb = "a: &a [x,x,x,x,x,x,x,x,x]\n";
  for (char c = 'b'; c <= 'i'; ++c) {
    const std::string before(1, static_cast<char>(c - 1));
    bomb += std::string(1, c) + ": &" + c + " [*" + before + ",*" + before + ",*" + before + "]\n";
  }
  EXPECT_THAT(fault_of(bomb), HasSubstr("1:4: an anchor"));
}

TEST(SiteFileFaults, RefusesWhatIsNoPlainUtf8Text) {
  EXPECT_THAT(fault_of("site:\n  name: M\xFCller\n"), HasSubstr("2:10: the file is not UTF-8 here"));
  EXPECT_THAT(fault_of("site:\n  name: \xC3"), HasSubstr("2:9: the file is not UTF-8 here"));
  EXPECT_THAT(fault_of("\xFF\xFEs\0i\0"), HasSubstr("1:1: the file is not UTF-8 here"));
  EXPECT_THAT(fault_of("\xC0\xAF"), HasSubstr("not UTF-8"));          // overlong
  EXPECT_THAT(fault_of("\xE0\x80\xAF"), HasSubstr("not UTF-8"));      // overlong
  EXPECT_THAT(fault_of("\xED\xA0\x80"), HasSubstr("not UTF-8"));      // surrogate
  EXPECT_THAT(fault_of("\xF4\x90\x80\x80"), HasSubstr("not UTF-8"));  // beyond U+10FFFF
  EXPECT_THAT(fault_of(std::string("site:\0", 6)),
              HasSubstr("1:6: the file holds the control character 0x00"));
  EXPECT_THAT(fault_of("a: \x1B[31m\n"), HasSubstr("1:4: the file holds the control character 0x1B"));
  EXPECT_THAT(fault_of(site_with_source("{kind: recording, path: \"a\\x00b\"}")),
              HasSubstr("source.path is the text \"a?b\""));
}

TEST(SiteFileFaults, TellsEveryLineIndentedWithATab) {
  EXPECT_THAT(faults_of("site:\n\tname: x\n  \tzone: UTC\n\t# a comment may\n\t\n"),
              testing::ElementsAre("2:1: this line is indented with a tab; indent with spaces",
                                   "3:3: this line is indented with a tab; indent with spaces"));
}

TEST(SiteFileFaults, CountsColumnsInCharacters) {
  EXPECT_THAT(fault_of(kLeastSite + "events: {\"hysteresis_pct\": 2, \"größe\": 3}\n"),
              HasSubstr("4:31: events.größe"));
  EXPECT_THAT(fault_of("\xEF\xBB\xBF"
                       "größe: \"ä\" ö: ü\n"),
              HasSubstr("1:12: this is not YAML"));
}

TEST(SiteFileFaults, StandsFilesMadeToExhaustIt) {
  EXPECT_THAT(fault_of(std::string(kLargestFileBytes + 1, ' ')),
              HasSubstr("the file is larger than 262144 bytes"));
  const auto repeat = [](const std::string& piece, std::size_t bytes) {
    std::string text;
    while (text.size() + piece.size() <= bytes)
      text += piece;
    return text;
  };
  EXPECT_THAT(fault_of(repeat("[", kLargestFileBytes)), HasSubstr("nests deeper than 16 levels"));
  EXPECT_THAT(fault_of(repeat("- ", kLargestFileBytes)), HasSubstr("nests deeper than 16 levels"));
  EXPECT_THAT(fault_of(repeat("{a: ", kLargestFileBytes)), HasSubstr("nests deeper than 16 levels"));
  EXPECT_THAT(fault_of("a: [" + repeat("1, ", 100'000) + "]"), HasSubstr("more than 20000 values"));
  EXPECT_FALSE(parse_site(repeat("? ", kLargestFileBytes), "f").ok());
  EXPECT_FALSE(parse_site(repeat("\"", kLargestFileBytes), "f").ok());
  EXPECT_FALSE(parse_site(std::string(kLargestFileBytes, 'x'), "f").ok());
  EXPECT_FALSE(parse_site(std::string(kLargestFileBytes, '\n'), "f").ok());

  std::string unknown;
  for (int i = 0; i < 9000; ++i)
    unknown.append("k").append(std::to_string(i)).append(": 1\n");
  EXPECT_EQ(faults_of(kLeastSite + unknown).size(), 9000U);
}

TEST(SiteFileFaults, CutsLongValuesShort) {
  const std::string fault = fault_of(kLeastSite + "events: {sag_pct: " + std::string(5000, 'x') + "}\n");
  EXPECT_LT(fault.size(), 300U);
  EXPECT_THAT(fault, HasSubstr("xxx..."));
}

}  // namespace
}  // namespace tramline::config
