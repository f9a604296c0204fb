#include "config/time_text.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cstdint>
#include <limits>
#include <string>
#include <string_view>

namespace tramline::config {
namespace {

using testing::HasSubstr;

// Seconds since 1970 in this file: GNU coreutils 9.1, `date -u -d "TEXT" +%s`.
constexpr std::int64_t kMarchMorning = 1'772'325'000;  // 2026-03-01T00:30:00Z

UtcNs at(std::int64_t seconds, std::int64_t ns = 0) {
  return UtcNs{seconds * kNsPerSecond + ns};
}

TEST(ParseUtc, ReadsEveryWayToWriteOneInstant) {
  for (const char* text : {
           "2026-03-01T06:00:00+05:30",
           "2026-03-01T06:00+05:30",
           "2026-03-01 06:00:00 +05:30",
           "2026-03-01T06:00:00+0530",
           "2026-03-01T00:30:00Z",
           "2026-03-01t00:30:00z",
           "2026-02-28T19:30:00-05",
           "2026-03-01T00:30:00.000+00:00",
           "2026-02-28T16:15:00-08:15",
       }) {
    const Result<UtcNs> t = parse_utc(text);
    ASSERT_TRUE(t.ok()) << text << ": " << t.error().text();
    EXPECT_EQ(t.value(), at(kMarchMorning)) << text;
  }
}

TEST(ParseUtc, KeepsNanosecondsAndDropsWhatIsFiner) {
  EXPECT_EQ(parse_utc("2026-03-01T00:30:00.123Z").value(), at(kMarchMorning, 123'000'000));
  EXPECT_EQ(parse_utc("2026-03-01T00:30:00,5Z").value(), at(kMarchMorning, 500'000'000));
  EXPECT_EQ(parse_utc("2026-03-01T00:30:00.123456789999Z").value(), at(kMarchMorning, 123'456'789));
}

TEST(ParseUtc, KnowsLeapYearsAndTheEndsOfItsRange) {
  EXPECT_EQ(parse_utc("2024-02-29T12:00:00Z").value(), at(1'709'208'000));
  EXPECT_EQ(parse_utc("1970-01-01T00:00:00Z").value(), at(0));
  EXPECT_EQ(parse_utc("2199-12-31T23:59:59Z").value(), at(7'258'118'399));
}

TEST(ParseUtc, RefusesWithReasonAndRemedy) {
  const struct {
    const char* text;
    const char* reason;
  } cases[] = {
      {"", "does not begin with a date"},
      {"yesterday", "does not begin with a date"},
      {"2026-3-1T00:00Z", "does not begin with a date"},
      {"2026-03-01", "offset from UTC is missing"},
      {"2026-03-01T06:00:00", "offset from UTC is missing"},
      {"2026-02-29T06:00:00Z", "no such day"},
      {"2026-13-01T06:00:00Z", "no such day"},
      {"2026-00-01T06:00:00Z", "no such day"},
      {"1969-12-31T23:59:59Z", "year is not between 1970 and 2199"},
      {"2200-01-01T00:00:00Z", "year is not between 1970 and 2199"},
      {"2026-03-01T24:00:00Z", "hour is not between"},
      {"2026-03-01T06:60:00Z", "minute is not between"},
      {"2026-03-01T06:00:61Z", "second is not between"},
      {"2016-12-31T23:59:60Z", "leap second"},
      {"2026-03-01T06Z", "time of day is not"},
      {"2026-03-01X06:00Z", "no time of day follows"},
      {"2026-03-01T06:00:00.Z", "no digits follow"},
      {"2026-03-01T06:00:0Z", "seconds are not two digits"},
      {"2026-03-01T06:00:00+16:00", "no offset"},
      {"2026-03-01T06:00:00+05:60", "no offset"},
      {"2026-03-01T06:00:00+5", "no offset"},
      {"2026-03-01T06:00:00+05:3", "no offset"},
      {"2026-03-01T06:00:00 IST", "no offset"},
      {"2026-03-01T06:00:00Z!", "something follows"},
  };
  for (const auto& c : cases) {
    const Result<UtcNs> t = parse_utc(c.text);
    ASSERT_FALSE(t.ok()) << c.text;
    EXPECT_THAT(t.error().what, HasSubstr(c.reason)) << c.text;
    EXPECT_EQ(t.error().where, std::string("\"").append(c.text).append("\""));
    EXPECT_THAT(t.error().remedy, HasSubstr("2026-03-01T06:00:00+05:30"));
  }
}

TEST(ParseTime, ReadsClockTimeOfTheZoneInSummerAndWinter) {
  EXPECT_EQ(parse_time("2026-03-01T06:00", "Asia/Kolkata").value(), at(kMarchMorning));
  EXPECT_EQ(parse_time("2026-07-01 12:00", "Europe/Berlin").value(), parse_utc("2026-07-01T10:00Z").value());
  EXPECT_EQ(parse_time("2026-01-01 12:00", "Europe/Berlin").value(), parse_utc("2026-01-01T11:00Z").value());
}

TEST(ParseTime, TakesADateAloneAsMidnightThere) {
  EXPECT_EQ(parse_time("2026-03-01", "Asia/Kolkata").value(), parse_utc("2026-02-28T18:30Z").value());
}

TEST(ParseTime, LetsAWrittenOffsetRule) {
  EXPECT_EQ(parse_time("2026-03-01T00:30:00Z", "Europe/Berlin").value(), at(kMarchMorning));
  EXPECT_EQ(parse_time("2026-03-01T00:30:00Z", "No/Where").value(), at(kMarchMorning));
}

// Central Europe goes from 02:00 to 03:00 on the last Sunday of March, and from 03:00 back to 02:00 on the
// last of October (Directive 2000/84/EC; common knowledge of the IANA time zone database).
TEST(ParseTime, RefusesTimesThatClocksSkipOrShowTwice) {
  const Result<UtcNs> skipped = parse_time("2026-03-29T02:30", "Europe/Berlin");
  ASSERT_FALSE(skipped.ok());
  EXPECT_THAT(skipped.error().what, HasSubstr("skip"));

  const Result<UtcNs> twice = parse_time("2026-10-25T02:30", "Europe/Berlin");
  ASSERT_FALSE(twice.ok());
  EXPECT_THAT(twice.error().what, HasSubstr("twice"));
  EXPECT_THAT(twice.error().remedy, HasSubstr("+02:00 for the first or +01:00 for the second"));
}

TEST(ParseTime, RefusesAnUnknownZone) {
  const Result<UtcNs> t = parse_time("2026-03-01T06:00", "No/Where");
  ASSERT_FALSE(t.ok());
  EXPECT_THAT(t.error().text(), HasSubstr("No/Where"));
}

TEST(FormatUtc, IsForProgramsAndCutsOffTheRest) {
  const UtcNs t = at(kMarchMorning + 59, 999'999'999);
  EXPECT_EQ(format_utc(t), "2026-03-01T00:30:59.999Z");
  EXPECT_EQ(format_utc(t, 0), "2026-03-01T00:30:59Z");
  EXPECT_EQ(format_utc(t, 9), "2026-03-01T00:30:59.999999999Z");
  EXPECT_EQ(format_utc(at(0, -1), 9), "1969-12-31T23:59:59.999999999Z");
}

TEST(FormatUtc, StandsEveryValueAndEveryNumberOfDecimals) {
  EXPECT_EQ(format_utc(UtcNs{std::numeric_limits<std::int64_t>::max()}, 9), "2262-04-11T23:47:16.854775807Z");
  EXPECT_EQ(format_utc(UtcNs{std::numeric_limits<std::int64_t>::min()}, 9), "1677-09-21T00:12:43.145224192Z");
  EXPECT_EQ(format_utc(at(0), -3), "1970-01-01T00:00:00Z");
  EXPECT_EQ(format_utc(at(0), 99), "1970-01-01T00:00:00.000000000Z");
}

TEST(FormatInZone, FollowsDaylightSavingToTheSecond) {
  const std::int64_t spring = parse_utc("2026-03-29T01:00:00Z").value().value;
  EXPECT_EQ(format_in_zone(UtcNs{spring - 1}, "Europe/Berlin"), "2026-03-29 01:59:59.999 +01:00");
  EXPECT_EQ(format_in_zone(UtcNs{spring}, "Europe/Berlin"), "2026-03-29 03:00:00.000 +02:00");
  const std::int64_t autumn = parse_utc("2026-10-25T01:00:00Z").value().value;
  EXPECT_EQ(format_in_zone(UtcNs{autumn - 1}, "Europe/Berlin"), "2026-10-25 02:59:59.999 +02:00");
  EXPECT_EQ(format_in_zone(UtcNs{autumn}, "Europe/Berlin"), "2026-10-25 02:00:00.000 +01:00");
}

TEST(FormatInZone, ShowsHalfHoursWestAndUtc) {
  const UtcNs t = at(kMarchMorning, 123'000'000);
  EXPECT_EQ(format_in_zone(t, "Asia/Kolkata"), "2026-03-01 06:00:00.123 +05:30");
  EXPECT_EQ(format_in_zone(t, "America/St_Johns", 0), "2026-02-28 21:00:00 -03:30");
  EXPECT_EQ(format_in_zone(t, "UTC", 1), "2026-03-01 00:30:00.1 +00:00");
}

TEST(FormatInZone, FallsBackToUtcAndSaysSo) {
  EXPECT_EQ(format_in_zone(at(kMarchMorning), "No/Where", 0), "2026-03-01 00:30:00 +00:00");
}

TEST(FormatInZone, IsReadBackByParseUtc) {
  for (const char* zone : {"UTC", "Asia/Kolkata", "Europe/Berlin", "America/St_Johns", "Asia/Kathmandu"}) {
    const UtcNs t = at(kMarchMorning, 987'654'321);
    const Result<UtcNs> back = parse_utc(format_in_zone(t, zone, 9));
    ASSERT_TRUE(back.ok()) << zone;
    EXPECT_EQ(back.value(), t) << zone;
  }
}

TEST(ZoneKnown, TellsZonesFromOtherNames) {
  EXPECT_TRUE(zone_known("UTC"));
  EXPECT_TRUE(zone_known("Asia/Kolkata"));
  for (const char* no_zone : {"", "Asia", "Asia/Kolkatta", "../../etc/passwd", "/etc/localtime", "+05:30"}) {
    EXPECT_FALSE(zone_known(no_zone)) << no_zone;
  }
}

TEST(ZoneNames, AreSortedAndHoldTheUsual) {
  const std::vector<std::string> names = zone_names();
  EXPECT_TRUE(std::is_sorted(names.begin(), names.end()));
  EXPECT_THAT(names, testing::IsSupersetOf({"UTC", "Asia/Kolkata", "America/Chicago"}));
}

TEST(ParseDuration, ReadsUnitsPlainSecondsAndSpaces) {
  const struct {
    const char* text;
    std::int64_t ms;
  } cases[] = {
      {"0", 0},
      {"90", 90'000},
      {"1.5", 1'500},
      {"90s", 90'000},
      {"1.5s", 1'500},
      {"200ms", 200},
      {"200 ms", 200},
      {"2h 5m", 7'500'000},
      {"2h5m", 7'500'000},
      {"10h30m", 37'800'000},
      {"12 min 30 s", 750'000},
      {"1d 2h 3m 4s 5ms", 93'784'005},
      {"1.5h", 5'400'000},
      {"  7s  ", 7'000},
      {"36500d", 3'153'600'000'000},
  };
  for (const auto& c : cases) {
    const Result<std::int64_t> ns = parse_duration(c.text);
    ASSERT_TRUE(ns.ok()) << c.text << ": " << ns.error().text();
    EXPECT_EQ(ns.value(), c.ms * kNsPerMillisecond) << c.text;
  }
  EXPECT_EQ(parse_duration("0.000000001s").value(), 1);
}

TEST(ParseDuration, RefusesWithReasonAndRemedy) {
  const struct {
    const char* text;
    const char* reason;
  } cases[] = {
      {"", "empty"},
      {"   ", "empty"},
      {"-5s", "number is missing"},
      {"s", "number is missing"},
      {".5s", "number is missing"},
      {"5.s", "no digits follow"},
      {"5 weeks", "unit is not"},
      {"5M", "unit is missing"},
      {"12:30:00", "unit is missing"},
      {"2h 5", "unit is missing"},
      {"5 5s", "unit is missing"},
      {"5m 2h", "larger to smaller"},
      {"5m 5min", "larger to smaller"},
      {"5s 5s", "larger to smaller"},
      {"1.5h 5m", "only its last number"},
      {"36501d", "longer than 36500 days"},
      {"36500d 1h", "longer than 36500 days"},
      {"99999999999999999999s", "longer than 36500 days"},
      {"999999999999999d", "longer than 36500 days"},
      {"nan", "number is missing"},
      {"1e3", "unit is not"},
  };
  for (const auto& c : cases) {
    const Result<std::int64_t> ns = parse_duration(c.text);
    ASSERT_FALSE(ns.ok()) << c.text;
    EXPECT_THAT(ns.error().what, HasSubstr(c.reason)) << c.text;
    EXPECT_THAT(ns.error().remedy, HasSubstr("2h 5m"));
  }
}

TEST(FormatDuration, GivesThreeDigitsOrTwoUnits) {
  const struct {
    std::int64_t ns;
    const char* text;
  } cases[] = {
      {0, "0 s"},
      {1, "0.001 µs"},
      {20'000, "20 µs"},
      {8'333'333, "8.33 ms"},
      {10'000'000, "10 ms"},
      {160'000'000, "160 ms"},
      {1'620'000'000, "1.62 s"},
      {1'500'000'000, "1.5 s"},
      {2'000'000'000, "2 s"},
      {45'340'000'000, "45.3 s"},
      {60'000'000'000, "1 min"},
      {750'000'000'000, "12 min 30 s"},
      {11'520'000'000'000, "3 h 12 min"},
      {190'800'000'000'000, "2 d 5 h"},
      {-1'620'000'000, "-1.62 s"},
  };
  for (const auto& c : cases)
    EXPECT_EQ(format_duration(c.ns), c.text) << c.ns;
}

TEST(FormatDuration, CarriesWhatRoundingMakesAWholeNextUnit) {
  EXPECT_EQ(format_duration(999'600), "1 ms");
  EXPECT_EQ(format_duration(999'600'000), "1 s");
  EXPECT_EQ(format_duration(59'960'000'000), "1 min");
  EXPECT_EQ(format_duration(3'599'600'000'000), "1 h");
  EXPECT_EQ(format_duration(86'399'000'000'000), "1 d");
  EXPECT_EQ(format_duration(std::numeric_limits<std::int64_t>::max()), "106752 d");
  EXPECT_EQ(format_duration(std::numeric_limits<std::int64_t>::min()), "-106752 d");
}

TEST(FormatDuration, IsReadBackByParseDuration) {
  for (const std::int64_t ms : {1LL, 160LL, 1'620LL, 59'900LL, 750'000LL, 11'520'000LL, 190'800'000LL}) {
    const std::int64_t ns = ms * kNsPerMillisecond;
    const Result<std::int64_t> back = parse_duration(format_duration(ns));
    ASSERT_TRUE(back.ok()) << format_duration(ns);
    EXPECT_EQ(back.value(), ns);
  }
}

}  // namespace
}  // namespace tramline::config
