#include "daemon/acquire/board.hpp"

#include <algorithm>
#include <cstdio>
#include <optional>
#include <string>
#include <utility>
#include <variant>

#include "daemon/acquire/board_frames.hpp"
#include "daemon/acquire/byte_link.hpp"
#include "daemon/acquire/recording.hpp"

namespace tramline::acquire {
namespace {

constexpr std::chrono::milliseconds kStep(100);
constexpr std::chrono::milliseconds kHelloWithin(6000);  // a hello comes once a second
constexpr double kLateWithinS = 10.0;  // further back in the count is no late frame but another count

class Board : public Device {
 public:
  Board(const config::BoardSettings& settings, std::vector<config::ChannelSettings> channels)
      : settings_(settings), channels_(std::move(channels)) {}

  Result<StreamInfo> open(const std::atomic<bool>& stop) override {
    auto link = open_link(settings_);
    if (!link) return link.error();
    link_ = std::move(link).value();
    for (auto waited = std::chrono::milliseconds(0); waited < kHelloWithin && !stop; waited += kStep) {
      auto bytes = link_->receive(kStep);
      if (!bytes) return bytes.error();
      decoder_.feed(bytes.value());
      while (auto frame = decoder_.next()) {
        // Samples that follow in the same bytes wait for the first read().
        if (auto* hello = std::get_if<BoardHello>(&*frame)) {
          stamp(came_);
          refused_before_ = decoder_.refused_bytes();
          return meet(std::move(*hello));
        }
      }
      if (link_->datagrams()) decoder_.forget_rest();
    }
    if (decoder_.refused_bytes() > 0) {
      return Error{link_->what(), "bytes come, but no hello of a board is among them",
                   "see that the speed of the line is the board's and that it sends board frames, version 1"};
    }
    return Error{link_->what(), "no board says hello", "see that the board is powered and sends"};
  }

  Result<bool> read(Arrival& arrival, std::chrono::milliseconds at_most) override {
    if (failed_) return *failed_;
    if (auto taken = take_frames(arrival); !taken) failed_ = taken.error();
    if (arrival.frames == 0 && !failed_) {
      auto bytes = link_->receive(at_most);
      if (!bytes) return bytes.error();
      if (bytes.value().empty()) return false;
      stamp(came_);
      if (link_->datagrams()) decoder_.forget_rest();
      decoder_.feed(bytes.value());
      if (auto taken = take_frames(arrival); !taken) failed_ = taken.error();
    }
    if (failed_ && arrival.frames == 0) return *failed_;
    arrival.monotonic_ns = came_.monotonic_ns;
    arrival.utc_ns = came_.utc_ns;
    return arrival.frames > 0;
  }

  [[nodiscard]] std::int64_t refused_bytes() const override {
    return decoder_.refused_bytes() - refused_before_ + (link_ ? link_->strangers_bytes() : 0);
  }

 private:
  Result<StreamInfo> meet(BoardHello hello) {
    std::vector<std::string> names;
    for (const BoardChannel& channel : hello.channels)
      names.push_back(channel.name);
    auto columns = columns_for(channels_, names, link_->what());
    if (!columns) return columns.error();
    columns_ = std::move(columns).value();
    if (auto sound = check_rate(hello.rate_hz, link_->what()); !sound) return sound.error();
    StreamInfo info;
    char figures[96];
    std::snprintf(figures, sizeof figures, "%zu channels, %d bit, %g Hz", hello.channels.size(),
                  8 * hello.bytes_a_sample, hello.rate_hz);
    info.what = "board " + hello.type + (hello.serial.empty() ? "" : " number " + hello.serial) + " on " +
                link_->what() + ", " + figures;
    info.rate_hz = hello.rate_hz;
    info.remarks.push_back(hello.calibrated_day == 0
                               ? std::string("the board says that it was not calibrated")
                               : "the board's own calibration is of " + day_text(hello.calibrated_day));
    hello_ = std::move(hello);
    return info;
  }

  static std::string day_text(std::uint32_t day) {
    const std::chrono::year_month_day date{std::chrono::sys_days(std::chrono::days(day))};
    char text[32];
    std::snprintf(text, sizeof text, "%04d-%02u-%02u", static_cast<int>(date.year()),
                  static_cast<unsigned>(date.month()), static_cast<unsigned>(date.day()));
    return text;
  }

  /// Moves whole frames into `arrival` as long as each follows the one before.
  Status take_frames(Arrival& arrival) {
    for (;;) {
      if (!held_) {
        auto frame = decoder_.next();
        if (!frame) return kDone;
        if (const auto* hello = std::get_if<BoardHello>(&*frame)) {
          if (*hello == hello_) continue;
          return Error{
              link_->what(),
              hello->begin == hello_.begin ? "the board describes itself anew" : "the board started anew",
              "if that goes on, see to its supply"};
        }
        held_ = std::get<BoardSamples>(*frame);
      }
      const std::int64_t first = place_of(held_->first);
      if (next_ && first < *next_) {
        if (static_cast<double>(*next_ - first) > kLateWithinS * hello_.rate_hz)
          return Error{link_->what(), "the board began to count anew", "if that goes on, see to its supply"};
        held_.reset();  // late, or twice
        continue;
      }
      if (arrival.frames > 0 && first != *next_) return kDone;
      if (arrival.frames == 0) arrival.first = first;
      append(*held_, arrival);
      next_ = first + static_cast<std::int64_t>(held_->frames);
      held_.reset();
    }
  }

  /// The board's count of 32 bits, carried on beyond them.
  [[nodiscard]] std::int64_t place_of(std::uint32_t first) const {
    if (!next_) return first;
    return *next_ + static_cast<std::int32_t>(first - static_cast<std::uint32_t>(*next_));
  }

  void append(const BoardSamples& samples, Arrival& arrival) const {
    const std::size_t width = hello_.channels.size();
    const auto bytes = static_cast<std::size_t>(hello_.bytes_a_sample);
    for (std::size_t i = 0; i < samples.frames; ++i) {
      for (std::size_t c = 0; c < columns_.size(); ++c) {
        const BoardChannel& channel = hello_.channels[columns_[c]];
        const std::int32_t count =
            board_count(samples.bytes.data() + (i * width + columns_[c]) * bytes, hello_.bytes_a_sample);
        arrival.values.push_back(static_cast<float>((static_cast<double>(count) + channel.offset_counts) *
                                                    channel.volts_per_count));
        if (count <= channel.lowest || count >= channel.highest)
          arrival.over_range.push_back({c, arrival.frames + i, 1});
      }
    }
    for (std::size_t c = 0; c < columns_.size(); ++c) {
      if ((samples.over_range >> columns_[c] & 1U) != 0)
        arrival.over_range.push_back({c, arrival.frames, samples.frames});
    }
    arrival.frames += samples.frames;
  }

  config::BoardSettings settings_;
  std::vector<config::ChannelSettings> channels_;
  std::unique_ptr<ByteLink> link_;
  BoardFrameDecoder decoder_;
  BoardHello hello_;
  std::vector<std::size_t> columns_;  // of the board, by the site's channels
  std::optional<BoardSamples> held_;  // does not follow what was given before it
  std::optional<std::int64_t> next_;
  std::optional<Error> failed_;      // given after the frames before it
  std::int64_t refused_before_ = 0;  // bytes before the first hello: the end of a frame, and samples
  Arrival came_;                     // only its times: when the bytes in hand came
};

}  // namespace

std::unique_ptr<Device> make_board(const config::BoardSettings& settings,
                                   std::vector<config::ChannelSettings> channels) {
  return std::make_unique<Board>(settings, std::move(channels));
}

}  // namespace tramline::acquire
