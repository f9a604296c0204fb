#include "daemon/acquire/polled_meter.hpp"

#include <gtest/gtest.h>
#include <poll.h>

#include <atomic>
#include <bit>
#include <chrono>
#include <cmath>
#include <optional>
#include <string>
#include <vector>

#include "daemon/acquire/live_source.hpp"
#include "tests/acquire/meter_server.hpp"

namespace tramline::acquire {
namespace {

using std::chrono::milliseconds;
using Link = config::PolledMeterSettings::Link;
constexpr int kReadHolding = 3;  // functions: Modbus application protocol 1.1b3, 6.3 and 6.4
constexpr int kReadInput = 4;

config::PolledMeterSettings at(const TcpMeterServer& server) {
  config::PolledMeterSettings settings;
  settings.link = Link::tcp;
  settings.host = "127.0.0.1";
  settings.port = server.port();
  settings.every_s = 0.001;
  return settings;
}

config::PolledMeterSettings at(const RtuMeterServer& server) {
  config::PolledMeterSettings settings;
  settings.link = Link::rtu;
  settings.device = server.device();
  settings.baud = 19'200;
  settings.every_s = 0.001;
  return settings;
}

/// The first is input L1, the second output L1, then L2.
std::vector<config::ChannelSettings> channels_at(const std::vector<std::string>& registers) {
  std::vector<config::ChannelSettings> channels;
  for (std::size_t i = 0; i < registers.size(); ++i) {
    config::ChannelSettings channel;
    channel.channel = {i % 2 == 0 ? Side::input : Side::output, static_cast<Phase>(i / 2 % 3)};
    channel.source_channel = registers[i];
    channels.push_back(channel);
  }
  return channels;
}

/// The device, asked as LiveSource asks it.
class Meter {
 public:
  template <class Server>
  Meter(const Server& server, const std::vector<std::string>& registers) : Meter(at(server), registers) {}
  Meter(const config::PolledMeterSettings& settings, const std::vector<std::string>& registers)
      : device_(make_polled_meter(settings, channels_at(registers))) {}

  /// "" if it could.
  std::string open() {
    const auto opened = device_->open(stop_);
    if (!opened) return opened.error().text();
    info = opened.value();
    return "";
  }
  /// The next reading; nothing, and `error` says why, if the device fails.
  std::optional<Arrival> reading() {
    Arrival arrival;
    for (int tries = 0; tries < 1000; ++tries) {
      arrival.clear();
      const auto came = device_->read(arrival, milliseconds(100));
      if (!came) {
        error = came.error().text();
        return std::nullopt;
      }
      EXPECT_EQ(came.value(), arrival.frames > 0);
      if (came.value()) return arrival;
    }
    error = "nothing came";
    return std::nullopt;
  }
  Device& device() { return *device_; }

  StreamInfo info;
  std::string error;

 private:
  std::atomic<bool> stop_{false};
  std::unique_ptr<Device> device_;
};

std::string why_not(const config::PolledMeterSettings& settings, const std::vector<std::string>& registers) {
  return Meter(settings, registers).open();
}

#define EXPECT_HAS(text, part) EXPECT_NE((text).find(part), std::string::npos) << (text)

// 230.5 and 231.25 as binary32: sign 0, exponent 134, fractions 102.5/128 and 103.25/128.
const std::vector<std::uint16_t> k230_5 = {0x4366, 0x8000};
const std::vector<std::uint16_t> k231_25 = {0x4367, 0x4000};

template <class Server>
class PolledMeterOver : public ::testing::Test {
 protected:
  Server server_;
};
using Servers = ::testing::Types<TcpMeterServer, RtuMeterServer>;
struct ServerNames {
  template <class T>
  static std::string GetName(int) {
    return std::is_same_v<T, TcpMeterServer> ? "Tcp" : "Rtu";
  }
};
TYPED_TEST_SUITE(PolledMeterOver, Servers, ServerNames);

TYPED_TEST(PolledMeterOver, GivesEveryTypeInTheOrderOfTheSite) {
  this->server_.set_input(0, {0x4366, 0x8000, 0x8000, 0x4366});
  this->server_.set_input(10, {0x8000});
  this->server_.set_holding(100, {0xFFFF, 0x0003, 0x8270, 0x8270, 0x0003, 0xFFFF, 0xFFFE});
  Meter meter(this->server_,
              {"holding:101:u32", "input:0:f32", "input:2:f32-swapped", "holding:103:u32-swapped",
               "holding:105:s32", "input:10:s16", "holding:100:u16"});
  ASSERT_EQ(meter.open(), "");
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->frames, 1U);
  EXPECT_EQ(reading->values,
            (std::vector<float>{230'000.0F, 230.5F, 230.5F, 230'000.0F, -2.0F, -32'768.0F, 65'535.0F}));
  EXPECT_TRUE(reading->over_range.empty());
}

TYPED_TEST(PolledMeterOver, AsksForWhatTouchesAtOnceAndInTheOrderOfAddresses) {
  Meter meter(this->server_, {"input:4:f32", "holding:9:u16", "input:0:f32", "input:2:f32"});
  ASSERT_EQ(meter.open(), "");
  ASSERT_TRUE(meter.reading()) << meter.error;
  const std::vector<Question> twice = {{1, kReadHolding, 9, 1},
                                       {1, kReadInput, 0, 6},  // at the opening
                                       {1, kReadHolding, 9, 1},
                                       {1, kReadInput, 0, 6}};  // the reading
  EXPECT_EQ(this->server_.questions(), twice);
}

TYPED_TEST(PolledMeterOver, ReadingsFollowOneAnotherOnTheClocks) {
  this->server_.set_input(0, k230_5);
  Meter meter(this->server_, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  const auto first = meter.reading();
  ASSERT_TRUE(first) << meter.error;
  this->server_.set_input(0, k231_25);
  const auto second = meter.reading();
  ASSERT_TRUE(second) << meter.error;
  EXPECT_EQ(first->values, std::vector<float>{230.5F});
  EXPECT_EQ(second->values, std::vector<float>{231.25F});
  EXPECT_GE(first->first, 0);
  EXPECT_GE(second->first, first->first);
  EXPECT_GT(second->monotonic_ns, first->monotonic_ns);
  // `first` counts milliseconds of that very clock.
  const double between_ms = static_cast<double>(second->monotonic_ns - first->monotonic_ns) / 1e6;
  EXPECT_NEAR(static_cast<double>(second->first - first->first), between_ms, 1.0);
}

TYPED_TEST(PolledMeterOver, NoReadingComesBeforeItsTime) {
  auto settings = at(this->server_);
  settings.every_s = 0.02;
  Meter meter(settings, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  for (std::int64_t i = 0; i < 5; ++i) {
    const auto reading = meter.reading();
    ASSERT_TRUE(reading) << meter.error;
    EXPECT_GE(reading->first, 20 * i);
  }
}

TYPED_TEST(PolledMeterOver, SaysWhatItIsAndWhatItCannotSee) {
  auto settings = at(this->server_);
  settings.every_s = 0.25;
  Meter meter(settings, {"input:0:f32", "input:2:f32"});
  ASSERT_EQ(meter.open(), "");
  EXPECT_EQ(meter.info.rate_hz, 1000.0);
  EXPECT_EQ(meter.info.readings_every_s, 0.25);
  EXPECT_HAS(meter.info.what, "unit 1, 2 channels every 0.25 s");
  ASSERT_EQ(meter.info.remarks.size(), 1U);
  EXPECT_EQ(meter.info.remarks[0],
            "readings of r.m.s. every 0.25 s: what is shorter, or shorter than the meter's own averaging, is "
            "not seen");
}

TYPED_TEST(PolledMeterOver, AReadingThatIsRefusedIsMissingAndCounted) {
  this->server_.set_input(0, k230_5);
  Meter meter(this->server_, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  this->server_.next({exception(MODBUS_EXCEPTION_SLAVE_OR_SERVER_BUSY),
                      exception(MODBUS_EXCEPTION_ILLEGAL_DATA_ADDRESS),
                      exception(MODBUS_EXCEPTION_SLAVE_OR_SERVER_FAILURE)});
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, std::vector<float>{230.5F});
  EXPECT_EQ(this->server_.questions().size(), 5U);   // the opening, three refused, one answered
  EXPECT_EQ(meter.device().refused_bytes(), 3 * 2);  // function and code
}

TYPED_TEST(PolledMeterOver, AReadingThatIsRefusedInPartIsBegunAnew) {
  this->server_.set_input(0, k230_5);
  this->server_.set_input(10, k231_25);
  Meter meter(this->server_, {"input:0:f32", "input:10:f32"});
  ASSERT_EQ(meter.open(), "");
  this->server_.next({Reaction{}, exception(MODBUS_EXCEPTION_SLAVE_OR_SERVER_BUSY)});
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, (std::vector<float>{230.5F, 231.25F}));
  const std::vector<Question> asked = {{1, kReadInput, 0, 2}, {1, kReadInput, 10, 2},
                                       {1, kReadInput, 0, 2}, {1, kReadInput, 10, 2},
                                       {1, kReadInput, 0, 2}, {1, kReadInput, 10, 2}};
  EXPECT_EQ(this->server_.questions(), asked);
}

TYPED_TEST(PolledMeterOver, RegistersThatHoldNoNumberAreAMissingReadingAndCounted) {
  // After the opening: NaN, then infinity, then a number; the function's code, count of bytes, registers.
  this->server_.set_input(0, {0x7FC0, 0x0000});
  Meter meter(this->server_, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  Arrival arrival;
  for (int tries = 0; tries < 1000 && this->server_.questions().size() < 2; ++tries) {
    const auto came = meter.device().read(arrival, milliseconds(100));
    ASSERT_TRUE(came.ok());
    EXPECT_FALSE(came.value());
    EXPECT_EQ(arrival.frames, 0U);
  }
  this->server_.set_input(0, {0xFF80, 0x0000});
  ASSERT_EQ(meter.device().refused_bytes(), 4);
  for (int tries = 0; tries < 1000 && this->server_.questions().size() < 3; ++tries) {
    const auto came = meter.device().read(arrival, milliseconds(100));
    ASSERT_TRUE(came.ok());
    EXPECT_FALSE(came.value());
  }
  EXPECT_EQ(meter.device().refused_bytes(), 8);
  this->server_.set_input(0, k230_5);
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, std::vector<float>{230.5F});
  EXPECT_EQ(meter.device().refused_bytes(), 8);
}

TYPED_TEST(PolledMeterOver, AReadingWithoutAnAnswerIsMissing) {
  this->server_.set_input(0, k230_5);
  Meter meter(this->server_, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  this->server_.next({silence()});
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, std::vector<float>{230.5F});
  EXPECT_EQ(this->server_.questions().size(), 3U);
}

TYPED_TEST(PolledMeterOver, ALineThatIsClosedEndsIt) {
  Meter meter(this->server_, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  ASSERT_TRUE(meter.reading()) << meter.error;
  this->server_.next({hang_up()});
  EXPECT_FALSE(meter.reading());
  EXPECT_HAS(meter.error, "is gone");
}

TYPED_TEST(PolledMeterOver, ALineThatIsClosedBetweenReadingsEndsItBeforeTheNext) {
  auto settings = at(this->server_);
  settings.every_s = 3600.0;
  Meter meter(settings, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  ASSERT_TRUE(meter.reading()) << meter.error;
  this->server_.close_line();
  EXPECT_FALSE(meter.reading());
  EXPECT_HAS(meter.error, "is gone");
  EXPECT_EQ(this->server_.questions().size(), 2U);
}

TYPED_TEST(PolledMeterOver, TheOpeningNamesTheRegisterAndChannelThatTheMeterDoesNotHave) {
  Meter meter(this->server_, {"input:0:f32", "input:998:f32", "input:1000:f32"});
  const std::string error = meter.open();
  EXPECT_HAS(error, "the meter does not have the register input:1000:f32 of the channel input L2");
  EXPECT_HAS(error, "counted from 0");
}

TYPED_TEST(PolledMeterOver, RegistersThatMayNotBeReadTogetherAreReadOneByOne) {
  this->server_.set_input(0, k230_5);
  this->server_.set_input(2, k231_25);
  this->server_.always([](const Question& question) {
    return question.count > 2 ? exception(MODBUS_EXCEPTION_ILLEGAL_DATA_ADDRESS) : Reaction{};
  });
  Meter meter(this->server_, {"input:2:f32", "input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, (std::vector<float>{231.25F, 230.5F}));
  EXPECT_EQ(meter.device().refused_bytes(), 0);  // what the opening found out is no fault
}

TYPED_TEST(PolledMeterOver, TheOpeningSaysWhatEachExceptionMeans) {
  // Codes: Modbus application protocol 1.1b3, 7.
  struct Row {
    unsigned code;
    const char* what;
    const char* remedy;
  };
  for (const Row& row :
       {Row{1, "does not let the register input:0:f32 of the channel input L1 be read", "holding"},
        Row{2, "does not have the register input:0:f32 of the channel input L1", "from 0"},
        Row{3, "does not have the register input:0:f32 of the channel input L1", "from 0"},
        Row{4, "cannot answer now", "display"}, Row{6, "cannot answer now", "display"},
        Row{10, "no unit 1", "source.unit"}, Row{11, "no unit 1", "source.unit"}}) {
    SCOPED_TRACE(row.code);
    TypeParam server;
    server.always([&](const Question&) { return exception(row.code); });
    const std::string error = why_not(at(server), {"input:0:f32"});
    EXPECT_HAS(error, row.what);
    EXPECT_HAS(error, row.remedy);
  }
}

TYPED_TEST(PolledMeterOver, AMeterThatIsBusyAtFirstIsAskedAgain) {
  this->server_.next({exception(MODBUS_EXCEPTION_SLAVE_OR_SERVER_BUSY)});
  Meter meter(this->server_, {"input:0:f32"});
  EXPECT_EQ(meter.open(), "");
}

TYPED_TEST(PolledMeterOver, AMeterThatNeverAnswersIsNotOpened) {
  this->server_.always([](const Question&) { return silence(); });
  const std::string error = why_not(at(this->server_), {"input:0:f32"});
  EXPECT_HAS(error, "no meter answers");
  EXPECT_HAS(error, "source.unit");
}

TYPED_TEST(PolledMeterOver, NothingIsOpenedOnceItIsToStop) {
  const auto device = make_polled_meter(at(this->server_), channels_at({"input:0:f32"}));
  const std::atomic<bool> stop{true};
  EXPECT_FALSE(device->open(stop).ok());
}

TYPED_TEST(PolledMeterOver, GivesALiveSourceItsReadings) {
  this->server_.set_input(0, k230_5);
  auto channels = channels_at({"input:0:f32", "input:2:f32"});
  channels[0].scale = 2.0;
  channels[1].offset = 1.0;
  auto settings = at(this->server_);
  settings.every_s = 0.01;
  LiveSource source(make_polled_meter(settings, channels), channels);
  // Waits for the other thread, a millisecond at a time; the time itself is not looked at.
  const auto until = [](const auto& done) {
    for (int tries = 0; tries < 20'000; ++tries) {
      if (done()) return true;
      poll(nullptr, 0, 1);
    }
    return false;
  };
  ASSERT_TRUE(until([&] {
    const auto ready = source.ready();
    EXPECT_TRUE(ready.ok());
    return !ready.ok() || ready.value();
  }));
  EXPECT_EQ(source.info().readings_every_s, 0.01);
  EXPECT_EQ(source.info().rate_hz, 1000.0);
  EXPECT_TRUE(source.info().live);

  measure::Block block;
  std::int64_t last = -1;
  for (int readings = 0; readings < 5; ++readings) {
    ASSERT_TRUE(until([&] {
      const auto more = source.next(block, 100);
      EXPECT_TRUE(more.ok() && more.value());
      return block.frames() > 0;
    }));
    EXPECT_EQ(block.frames(), 1U);
    EXPECT_GT(block.first.value, last);
    EXPECT_EQ(block.gap, measure::GapCause::none);
    last = block.first.value;
    EXPECT_EQ(block.channel(0)[0], 461.0F);
    EXPECT_EQ(block.channel(1)[0], 1.0F);
  }
  this->server_.next({hang_up()});
  std::string error;
  ASSERT_TRUE(until([&] {
    const auto more = source.next(block, 100);
    if (!more) error = more.error().text();
    return !more;
  }));
  EXPECT_HAS(error, "is gone");
}

// ---- the protocol's own worked bytes

TEST(PolledMeter, AsksAndReadsTheBytesOfTheProtocolsOwnExample) {
  // Modbus application protocol 1.1b3, 6.3: registers 108 to 110 are asked for, and hold 555, 0 and 100; 6.4:
  // input register 9 holds 10 (both from memory).
  TcpMeterServer server;
  Meter meter(server, {"holding:107:u16", "holding:108:u16", "holding:109:u16"});
  ASSERT_EQ(meter.open(), "");
  server.next({raw({0x03, 0x06, 0x02, 0x2B, 0x00, 0x00, 0x00, 0x64})});
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(server.last_question(), (std::vector<std::uint8_t>{0x03, 0x00, 0x6B, 0x00, 0x03}));
  EXPECT_EQ(reading->values, (std::vector<float>{555.0F, 0.0F, 100.0F}));

  TcpMeterServer other;
  Meter input(other, {"input:8:u16"});
  ASSERT_EQ(input.open(), "");
  other.next({raw({0x04, 0x02, 0x00, 0x0A})});
  const auto ten = input.reading();
  ASSERT_TRUE(ten) << input.error;
  EXPECT_EQ(other.last_question(), (std::vector<std::uint8_t>{0x04, 0x00, 0x08, 0x00, 0x01}));
  EXPECT_EQ(ten->values, std::vector<float>{10.0F});
}

// ---- TCP alone

TEST(PolledMeter, AnAnswerToAnotherQuestionIsNotTaken) {
  TcpMeterServer server;
  server.set_input(0, k230_5);
  Meter meter(server, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  server.next({raw({0x04, 0x04, 0x43, 0x67, 0x40, 0x00}, -1),  // to the question before
               raw({0x03, 0x04, 0x43, 0x67, 0x40, 0x00}),      // of the other table
               raw({0x04, 0x02, 0x43, 0x67})});                // too short
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, std::vector<float>{230.5F});
  EXPECT_EQ(server.questions().size(), 5U);
  EXPECT_GT(meter.device().refused_bytes(), 0);
}

TEST(PolledMeter, AServerThatGoesAwayEndsItAndOneThatComesBackIsOpenedAnew) {
  TcpMeterServer server;
  server.set_input(0, k230_5);
  Meter meter(server, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  server.next({hang_up()});
  EXPECT_FALSE(meter.reading());
  EXPECT_HAS(meter.error, "the connection is gone");
  EXPECT_HAS(meter.error, "see that the meter is powered and on the network");

  Meter again(server, {"input:0:f32"});
  ASSERT_EQ(again.open(), "");
  const auto reading = again.reading();
  ASSERT_TRUE(reading) << again.error;
  EXPECT_EQ(reading->values, std::vector<float>{230.5F});
}

TEST(PolledMeter, WhereNobodyListensCannotBeReached) {
  config::PolledMeterSettings settings;
  {
    const TcpMeterServer server;
    settings = at(server);
  }
  const std::string error = why_not(settings, {"input:0:f32"});
  EXPECT_HAS(error,
             "127.0.0.1 port " + std::to_string(settings.port) + ": cannot be reached (Connection refused)");
  EXPECT_HAS(error, "listens on that port");
}

TEST(PolledMeter, AMeterIsFoundByName) {
  TcpMeterServer server;
  auto settings = at(server);
  settings.host = "localhost";
  EXPECT_EQ(why_not(settings, {"input:0:f32"}), "");
}

TEST(PolledMeter, AskedIsTheUnitOfTheSettings) {
  TcpMeterServer server;
  for (const unsigned unit : {0U, 1U, 17U, 247U, 255U}) {
    auto settings = at(server);
    settings.unit = unit;
    EXPECT_EQ(why_not(settings, {"input:5:u16"}), "");
    EXPECT_EQ(server.questions().back(), (Question{static_cast<int>(unit), kReadInput, 5, 1}));
  }
}

TEST(PolledMeter, AUnitThatNoMeterCanHaveIsRefused) {
  TcpMeterServer server;
  auto settings = at(server);
  settings.unit = 248;
  EXPECT_HAS(why_not(settings, {"input:0:u16"}), "source.unit: 248 is no meter's address");
  const RtuMeterServer line;
  for (const unsigned unit : {0U, 248U, 255U}) {
    auto rtu = at(line);
    rtu.unit = unit;
    EXPECT_HAS(why_not(rtu, {"input:0:u16"}), "is no meter's address; 1 to 247");
  }
}

TEST(PolledMeter, AChannelWithoutARegisterIsNamed) {
  TcpMeterServer server;
  EXPECT_HAS(why_not(at(server), {"input:0:u16", "coil:0:u16"}),
             "source_channel of output L1: \"coil\" is no table; a register is");
}

TEST(PolledMeter, WaitsForFiveReadingsAndAtLeastFiveSeconds) {
  config::PolledMeterSettings settings;
  for (const auto& [every_s, patience] :
       {std::pair{0.1, milliseconds(5000)}, {1.0, milliseconds(5000)}, {60.0, milliseconds(300'000)}}) {
    settings.every_s = every_s;
    EXPECT_EQ(make_polled_meter(settings, channels_at({"input:0:u16"}))->patience(), patience);
  }
}

// ---- a serial line alone

TEST(PolledMeter, AnAnswerWithABadChecksumIsMissing) {
  RtuMeterServer server;
  server.set_input(0, k230_5);
  Meter meter(server, {"input:0:f32"});
  ASSERT_EQ(meter.open(), "");
  server.next({raw({0x04, 0x04, 0x43, 0x67, 0x40, 0x00, 0x00, 0x00})});
  const auto reading = meter.reading();
  ASSERT_TRUE(reading) << meter.error;
  EXPECT_EQ(reading->values, std::vector<float>{230.5F});
  EXPECT_EQ(server.questions().size(), 3U);
  EXPECT_EQ(meter.device().refused_bytes(), 2 + 4);
}

TEST(PolledMeter, AnotherUnitOnTheLineDoesNotAnswer) {
  const RtuMeterServer server(2);
  const std::string error = why_not(at(server), {"input:0:f32"});
  EXPECT_HAS(error, server.device() + ", unit 1: no meter answers");
  EXPECT_HAS(error, "source.baud and source.parity");
}

TEST(PolledMeter, ALineThatAnswersInGarbageSaysSo) {
  RtuMeterServer server;
  server.always([](const Question&) { return raw({0x04, 0x02, 0x43, 0x67, 0x12, 0x34}); });
  const std::string error = why_not(at(server), {"input:0:u16"});
  EXPECT_HAS(error, "what comes is no answer to the register input:0:u16 of the channel input L1");
  EXPECT_HAS(error, "source.parity");
}

TEST(PolledMeter, APortThatIsNotThereSaysSo) {
  config::PolledMeterSettings settings;
  settings.link = Link::rtu;
  settings.device = "/dev/tramline-no-such-port";
  EXPECT_EQ(why_not(settings, {"input:0:u16"}),
            "/dev/tramline-no-such-port: there is no such serial port; plug the adapter in, or see under "
            "/dev/serial/by-id what it is called");
}

TEST(PolledMeter, WhatIsNoSerialPortSaysSo) {
  config::PolledMeterSettings settings;
  settings.link = Link::rtu;
  settings.device = "/dev/null";
  EXPECT_HAS(why_not(settings, {"input:0:u16"}), "see that it is a serial port");
}

TEST(PolledMeter, ASpeedThatTheLineDoesNotDoIsRefused) {
  const RtuMeterServer server;
  auto settings = at(server);
  settings.baud = 12'345;
  EXPECT_HAS(why_not(settings, {"input:0:u16"}), "does not do 12345 baud; give a usual speed in source.baud");
}

TEST(PolledMeter, ASlowLineIsAskedForLessAtOnce) {
  // At 1200 baud 250 ms carry 27 characters of 11 bits: 5 of the frame and 11 registers.
  RtuMeterServer server;
  auto settings = at(server);
  settings.baud = 1200;
  std::vector<std::string> registers;
  for (int i = 0; i < 6; ++i)
    registers.push_back("input:" + std::to_string(2 * i) + ":u32");
  ASSERT_EQ(why_not(settings, registers), "");
  EXPECT_EQ(server.questions(), (std::vector<Question>{{1, kReadInput, 0, 10}, {1, kReadInput, 10, 2}}));
}

}  // namespace
}  // namespace tramline::acquire
