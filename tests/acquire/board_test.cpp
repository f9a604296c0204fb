#include "daemon/acquire/board.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <pty.h>
#include <termios.h>
#include <unistd.h>

#include <array>
#include <boost/asio/io_context.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/ip/udp.hpp>
#include <boost/asio/write.hpp>
#include <memory>
#include <random>
#include <string>
#include <utility>
#include <vector>

#include "board_signal.hpp"
#include "daemon/acquire/live_source.hpp"
#include "live.hpp"

/// Boards over the real interfaces: a pseudo-terminal for the serial line, TCP and UDP on loopback.
namespace tramline::acquire {
namespace {

using measure::GapCause;
using testing::ElementsAre;
using testing::HasSubstr;
namespace asio = boost::asio;

std::vector<config::ChannelSettings> channels() {
  return {{{Side::input, Phase::l1}, "", 1.0, 0.0, 0.0}, {{Side::output, Phase::l1}, "", 1.0, 0.0, 0.0}};
}

std::unique_ptr<Source> open_live(const config::BoardSettings& settings,
                                  std::vector<config::ChannelSettings> wanted = channels()) {
  return std::make_unique<LiveSource>(make_board(settings, wanted), wanted);
}

/// A serial line whose other end is in the test's hand.
class Line {
 public:
  Line() {
    std::array<char, 64> name{};
    termios raw{};
    cfmakeraw(&raw);
    if (openpty(&board_end_, &far_end_, name.data(), &raw, nullptr) == 0) name_ = name.data();
  }
  ~Line() { unplug(); }
  Line(const Line&) = delete;
  Line& operator=(const Line&) = delete;

  void send(const FrameBytes& bytes) const {
    for (std::size_t sent = 0; sent < bytes.size();) {
      const ssize_t now = write(board_end_, bytes.data() + sent, bytes.size() - sent);
      ASSERT_GT(now, 0);
      sent += static_cast<std::size_t>(now);
    }
  }
  void unplug() {
    if (board_end_ >= 0) close(board_end_);
    if (far_end_ >= 0) close(far_end_);
    board_end_ = far_end_ = -1;
  }
  [[nodiscard]] config::BoardSettings settings() const {
    config::BoardSettings settings;
    settings.device = name_;
    settings.baud = 115'200;
    return settings;
  }

 private:
  int board_end_ = -1;
  int far_end_ = -1;
  std::string name_;
};

void expect_made_up_volts(const Taken& taken) {
  for (std::size_t i = 0; i < taken.index.size(); ++i) {
    const auto sample = static_cast<std::uint32_t>(taken.index[i]);
    ASSERT_EQ(taken.volts[0][i], made_up_volts(sample, 0)) << sample;
    ASSERT_EQ(taken.volts[1][i], made_up_volts(sample, 1)) << sample;
  }
}

TEST(SerialBoard, GivesTheVoltsThatTheBoardSampled) {
  const Line line;
  tb_board board = made_up_board();
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  for (std::uint32_t i = 0; i < 50; ++i)
    line.send(samples_of(board, i * 64, 64));
  ASSERT_FALSE(await_ready(*source));
  EXPECT_THAT(source->info().what, HasSubstr("board test board number 0042"));
  EXPECT_THAT(source->info().what, HasSubstr("2 channels, 16 bit, 6400 Hz"));
  EXPECT_THAT(source->info().remarks, ElementsAre("the board's own calibration is of 2026-01-01"));
  EXPECT_EQ(source->info().rate_hz, 6400.0);
  Taken taken;
  take(*source, 3200, taken);
  EXPECT_EQ(taken.index.size(), 3200U);
  EXPECT_TRUE(taken.gaps.empty());
  expect_made_up_volts(taken);
  EXPECT_EQ(source->health().refused_bytes, 0);
}

TEST(SerialBoard, TakesItsChannelsByTheBoardsNamesOrNumbers) {
  const Line line;
  tb_board board = made_up_board(3, 3);
  auto wanted = channels();
  wanted[0].source_channel = "c";
  wanted[1].source_channel = "1";
  const auto source = open_live(line.settings(), wanted);
  line.send(hello_of(board));
  line.send(samples_of(board, 0, 64));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 64, taken);
  EXPECT_EQ(taken.volts[0][5], made_up_volts(5, 2));
  EXPECT_EQ(taken.volts[1][5], made_up_volts(5, 0));
}

TEST(SerialBoard, MakesGapsOfLostFramesAndFindsItsWayAfterNoise) {
  const Line line;
  tb_board board = made_up_board();
  std::mt19937 random(3);
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  std::int64_t noise_bytes = 0;
  for (std::uint32_t i = 0; i < 40; ++i) {
    FrameBytes frame = samples_of(board, i * 64, 64);
    if (i == 7) continue;                         // lost on the way
    if (i == 15) frame[40] ^= 0x10;               // a bit turned
    if (i == 23) frame.resize(frame.size() / 2);  // half a frame
    if (i == 15 || i == 23) noise_bytes += static_cast<std::int64_t>(frame.size());
    if (i == 30) {
      FrameBytes noise(333);
      for (auto& byte : noise)
        byte = static_cast<std::uint8_t>(random());
      line.send(noise);
      noise_bytes += 333;
    }
    line.send(frame);
  }
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 37 * 64, taken);
  ASSERT_EQ(taken.index.size(), 37U * 64U);
  EXPECT_THAT(taken.gaps,
              ElementsAre(GapCause::samples_lost, GapCause::samples_lost, GapCause::samples_lost));
  expect_made_up_volts(taken);
  EXPECT_EQ(taken.index.back(), 40 * 64 - 1);
  EXPECT_EQ(source->health().lost_frames, 3 * 64);
  EXPECT_EQ(source->health().refused_bytes, noise_bytes);
}

TEST(SerialBoard, ReportsOverRangeFromTheBoardsWordAndFromItsCounts) {
  const Line line;
  tb_board board = made_up_board();
  board.channel[0].highest = 1050;  // every hundred samples, 50 to 99
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  line.send(samples_of(board, 0, 60));
  line.send(samples_of(board, 60, 2, 0x01));
  line.send(samples_of(board, 62, 2, 0x02));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 64, taken);
  std::sort(taken.over_range.begin(), taken.over_range.end());
  taken.over_range.erase(std::unique(taken.over_range.begin(), taken.over_range.end()),
                         taken.over_range.end());
  EXPECT_THAT(taken.over_range, ElementsAre(50, 51, 52, 53, 54, 55, 56, 57, 58, 59, 60, 61, 62, 63));
}

TEST(SerialBoard, CarriesTheCountOnBeyond32Bits) {
  const Line line;
  tb_board board = made_up_board();
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  line.send(samples_of(board, 0xFFFFFFC0U, 64));
  line.send(samples_of(board, 0, 64));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 128, taken);
  EXPECT_EQ(taken.index.back(), 127);
  EXPECT_TRUE(taken.gaps.empty());
}

TEST(SerialBoard, LeavesOutFramesThatComeTwice) {
  const Line line;
  tb_board board = made_up_board();
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  for (const std::uint32_t first : {0U, 64U, 0U, 64U, 128U})
    line.send(samples_of(board, first, 64));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 192, taken);
  EXPECT_EQ(taken.index.back(), 191);
  EXPECT_TRUE(taken.gaps.empty());
}

TEST(SerialBoard, EndsWhenItIsUnpluggedAfterHandingOutWhatCame) {
  Line line;
  tb_board board = made_up_board();
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  line.send(samples_of(board, 0, 64));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 64, taken);
  line.unplug();
  take(*source, 65, taken);
  ASSERT_TRUE(taken.error);
  EXPECT_EQ(taken.index.size(), 64U);
  EXPECT_THAT(taken.error->text(), HasSubstr("the serial port is gone"));
}

TEST(SerialBoard, EndsWhenTheBoardStartsAnew) {
  const Line line;
  tb_board board = made_up_board();
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  line.send(samples_of(board, 100'000, 64));
  ASSERT_FALSE(await_ready(*source));
  board.begin = 78;
  line.send(hello_of(board));
  line.send(samples_of(board, 0, 64));
  Taken taken;
  take(*source, 1000, taken);
  ASSERT_TRUE(taken.error);
  EXPECT_EQ(taken.index.size(), 64U);
  EXPECT_THAT(taken.error->what, HasSubstr("started anew"));
}

TEST(SerialBoard, EndsWhenTheCountBeginsAnewWithoutAHello) {
  const Line line;
  tb_board board = made_up_board();
  const auto source = open_live(line.settings());
  line.send(hello_of(board));
  line.send(samples_of(board, 100'000, 64));
  line.send(samples_of(board, 0, 64));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 1000, taken);
  ASSERT_TRUE(taken.error);
  EXPECT_THAT(taken.error->what, HasSubstr("began to count anew"));
}

TEST(SerialBoard, SaysWhatIsWrongWithThePort) {
  config::BoardSettings settings;
  settings.device = "/dev/there-is-no-such-port";
  auto error = await_ready(*open_live(settings));
  ASSERT_TRUE(error);
  EXPECT_THAT(error->text(), HasSubstr("there is no such serial port"));
  settings.device = "/dev/null";
  error = await_ready(*open_live(settings));
  ASSERT_TRUE(error);
  EXPECT_THAT(error->text(), HasSubstr("serial port"));
}

TEST(SerialBoard, WantsChannelsThatTheBoardHas) {
  const Line line;
  tb_board board = made_up_board();
  auto wanted = channels();
  wanted[1].source_channel = "output";
  const auto source = open_live(line.settings(), wanted);
  line.send(hello_of(board));
  const auto error = await_ready(*source);
  ASSERT_TRUE(error);
  EXPECT_THAT(error->text(), HasSubstr("output"));
}

TEST(TcpBoard, GivesTheVoltsAndEndsWithTheConnection) {
  asio::io_context loop;
  asio::ip::tcp::acceptor acceptor(loop, {asio::ip::address_v4::loopback(), 0});
  config::BoardSettings settings;
  settings.link = config::BoardSettings::Link::tcp;
  settings.host = "127.0.0.1";
  settings.port = acceptor.local_endpoint().port();
  const auto source = open_live(settings);
  asio::ip::tcp::socket socket = acceptor.accept();
  tb_board board = made_up_board();
  FrameBytes bytes = hello_of(board);
  for (std::uint32_t i = 0; i < 50; ++i)
    append(bytes, samples_of(board, i * 64, 64));
  asio::write(socket, asio::buffer(bytes));
  ASSERT_FALSE(await_ready(*source));
  Taken taken;
  take(*source, 3200, taken);
  EXPECT_TRUE(taken.gaps.empty());
  expect_made_up_volts(taken);
  socket.close();
  take(*source, 3201, taken);
  ASSERT_TRUE(taken.error);
  EXPECT_THAT(taken.error->text(), HasSubstr("the connection is gone"));
}

TEST(TcpBoard, SaysThatTheBoxCannotBeReached) {
  asio::io_context loop;
  asio::ip::tcp::acceptor acceptor(loop, {asio::ip::address_v4::loopback(), 0});
  config::BoardSettings settings;
  settings.link = config::BoardSettings::Link::tcp;
  settings.host = "127.0.0.1";
  settings.port = acceptor.local_endpoint().port();
  acceptor.close();
  const auto error = await_ready(*open_live(settings));
  ASSERT_TRUE(error);
  EXPECT_THAT(error->text(), HasSubstr("cannot be reached"));
}

/// A port that was free a moment ago.
unsigned short free_udp_port() {
  asio::io_context loop;
  const asio::ip::udp::socket socket(loop, {asio::ip::address_v4::loopback(), 0});
  return socket.local_endpoint().port();
}

TEST(UdpBoard, TakesOneFrameADatagramAndRefusesStrangers) {
  config::BoardSettings settings;
  settings.link = config::BoardSettings::Link::udp;
  settings.host = "0.0.0.0";
  settings.port = free_udp_port();
  const auto source = open_live(settings);
  asio::io_context loop;
  const asio::ip::udp::endpoint there(asio::ip::address_v4::loopback(),
                                      static_cast<unsigned short>(settings.port));
  asio::ip::udp::socket box(loop, {asio::ip::make_address_v4("127.0.0.1"), 0});
  asio::ip::udp::socket stranger(loop, {asio::ip::make_address_v4("127.0.0.2"), 0});
  tb_board board = made_up_board();
  const FrameBytes hello = hello_of(board);
  // Whether the other side listens already is not known: say hello until it has been heard.
  const auto send = [&](asio::ip::udp::socket& from, const FrameBytes& bytes) {
    boost::system::error_code ignored;
    from.send_to(asio::buffer(bytes), there, 0, ignored);
  };
  std::uint32_t next = 0;
  for (;;) {
    send(box, hello);
    send(box, samples_of(board, next, 64));
    next += 64;
    const auto ready = source->ready();
    ASSERT_TRUE(ready) << ready.error().text();
    if (ready.value()) break;
    std::this_thread::yield();
  }
  const std::uint32_t lost = next;
  next += 64;
  tb_board other = made_up_board();
  other.begin = 99;
  send(stranger, hello_of(other));
  send(stranger, samples_of(other, lost, 64));
  FrameBytes torn = samples_of(board, lost, 64);
  torn.resize(50);
  send(box, torn);
  for (int i = 0; i < 4; ++i, next += 64)
    send(box, samples_of(board, next, 64));
  Taken taken;
  // Sample 0 is the first that was heard; the last comes at a known distance after the lost ones.
  measure::Block block;
  bool gap = false;
  std::size_t after = 0;
  while (after < 256) {
    const auto more = source->next(block, 1000);
    ASSERT_TRUE(more) << more.error().text();
    if (block.frames() == 0) continue;
    gap = gap || block.gap == GapCause::samples_lost;
    if (gap) after += block.frames();
  }
  EXPECT_EQ(after, 256U);
  EXPECT_EQ(source->health().lost_frames % 64, 0);
  EXPECT_GE(source->health().refused_bytes, 50 + static_cast<std::int64_t>(hello.size()));
}

TEST(UdpBoard, SaysThatItCannotListen) {
  config::BoardSettings settings;
  settings.link = config::BoardSettings::Link::udp;
  settings.host = "192.0.2.1";  // an address of no machine (RFC 5737)
  settings.port = 4711;
  auto error = await_ready(*open_live(settings));
  ASSERT_TRUE(error);
  EXPECT_THAT(error->text(), HasSubstr("cannot listen"));
  settings.host = "the box";
  error = await_ready(*open_live(settings));
  ASSERT_TRUE(error);
  EXPECT_THAT(error->text(), HasSubstr("is no address"));
}

}  // namespace
}  // namespace tramline::acquire
