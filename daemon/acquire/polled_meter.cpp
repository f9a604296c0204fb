#include "daemon/acquire/polled_meter.hpp"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <cstdio>
#include <optional>
#include <string>
#include <utility>

#include "config/meter_register.hpp"
#include "daemon/acquire/meter_requests.hpp"
#include "daemon/acquire/modbus_link.hpp"

namespace tramline::acquire {
namespace {

constexpr int kTriesAtFirst = 3;
constexpr std::chrono::milliseconds kBetweenTries(100);
constexpr double kMillisecondsHz = 1000.0;

std::string seconds_text(double seconds) {
  char text[32];
  std::snprintf(text, sizeof text, "%g s", seconds);
  return text;
}

class PolledMeter : public Device {
 public:
  PolledMeter(const config::PolledMeterSettings& settings, std::vector<config::ChannelSettings> channels)
      : settings_(settings), channels_(std::move(channels)), every_ns_(std::llround(settings.every_s * 1e9)) {
    assert(every_ns_ > 0);
  }

  Result<StreamInfo> open(const std::atomic<bool>& stop) override {
    for (const config::ChannelSettings& channel : channels_) {
      auto found = config::parse_meter_register(channel.source_channel);
      if (!found)
        return Error{"source_channel of " + name_of(channel), found.error().what, found.error().remedy};
      registers_.push_back(found.value());
    }
    auto link = ModbusLink::open(settings_, stop);
    if (!link) return link.error();
    link_.emplace(std::move(link).value());
    if (auto met = meet(stop); !met) return met.error();

    Arrival now;
    stamp(now);
    opened_ns_ = now.monotonic_ns;
    due_ns_ = opened_ns_;
    refused_before_ = link_->refused_bytes();
    StreamInfo info;
    info.what = "meter at " + link_->what() + ", " + std::to_string(channels_.size()) + " channels every " +
                seconds_text(settings_.every_s);
    info.rate_hz = kMillisecondsHz;
    info.readings_every_s = settings_.every_s;
    info.remarks.push_back("readings of r.m.s. every " + seconds_text(settings_.every_s) +
                           ": what is shorter, or shorter than the meter's own averaging, is not seen");
    return info;
  }

  Result<bool> read(Arrival& arrival, std::chrono::milliseconds at_most) override {
    if (asking_ == 0) {
      stamp(asked_);
      const std::int64_t wait_ns = due_ns_ - asked_.monotonic_ns;
      if (wait_ns > 0) {
        const std::chrono::nanoseconds wait(wait_ns);
        return link_->wait(std::min<std::chrono::nanoseconds>(wait, at_most)) ? Result<bool>(false) : gone();
      }
    }
    // One question a call, so that no call takes longer than one answer.
    const MeterRequest& request = requests_[asking_];
    std::vector<std::uint16_t>& words = words_[asking_];
    const MeterAnswer answer = link_->ask(request, words.data());
    if (answer == MeterAnswer::gone) return gone();
    if (answer != MeterAnswer::values) {
      next_reading();
      return false;
    }
    if (++asking_ < requests_.size()) return false;
    return take(arrival);
  }

  [[nodiscard]] std::int64_t refused_bytes() const override {
    return link_ ? link_->refused_bytes() - refused_before_ + unreadable_bytes_ : 0;
  }

  [[nodiscard]] std::chrono::milliseconds patience() const override {
    return std::max(std::chrono::milliseconds(5000),
                    std::chrono::milliseconds(std::llround(5.0 * settings_.every_s * 1000.0)));
  }

 private:
  static std::string name_of(const config::ChannelSettings& channel) {
    return std::string(tramline::name_of(channel.channel.side)) + " " +
           std::string(tramline::name_of(channel.channel.phase));
  }

  /// Asks for everything once, to learn what the meter has.
  Status meet(const std::atomic<bool>& stop) {
    std::vector<MeterRequest> untried = requests_for(registers_, link_->most_words());
    std::reverse(untried.begin(), untried.end());
    requests_.clear();
    words_.clear();
    while (!untried.empty()) {
      MeterRequest request = std::move(untried.back());
      untried.pop_back();
      std::vector<std::uint16_t> words(static_cast<std::size_t>(request.words));
      const MeterAnswer answer = try_to_ask(request, words, stop);
      if (answer == MeterAnswer::values) {
        requests_.push_back(std::move(request));
        words_.push_back(std::move(words));
      } else if (answer == MeterAnswer::refused_address && request.registers.size() > 1) {
        // A meter may have each register, but not let them be read together.
        for (auto one = request.registers.rbegin(); one != request.registers.rend(); ++one)
          untried.push_back(
              {registers_[*one].table, registers_[*one].address, registers_[*one].words(), {*one}});
      } else {
        return no_answer(answer, request);
      }
    }
    return kDone;
  }

  MeterAnswer try_to_ask(const MeterRequest& request, std::vector<std::uint16_t>& words,
                         const std::atomic<bool>& stop) {
    MeterAnswer answer = MeterAnswer::late;
    for (int tries = 0; tries < kTriesAtFirst && !stop; ++tries) {
      answer = link_->ask(request, words.data());
      const bool may_pass =
          answer == MeterAnswer::late || answer == MeterAnswer::garbled || answer == MeterAnswer::refused;
      if (!may_pass) break;
      if (!link_->wait(kBetweenTries)) return MeterAnswer::gone;
    }
    return answer;
  }

  [[nodiscard]] Error no_answer(MeterAnswer answer, const MeterRequest& request) const {
    const bool tcp = settings_.link == config::PolledMeterSettings::Link::tcp;
    const config::ChannelSettings& channel = channels_[request.registers.front()];
    const std::string unit = std::to_string(settings_.unit);
    const std::string asked =
        "the register " + channel.source_channel + " of the channel " + name_of(channel);
    switch (answer) {
      case MeterAnswer::late:
        return {link_->what(), "no meter answers",
                tcp ? "see that source.unit is the meter's address and the meter is powered"
                    : "see that source.unit, source.baud and source.parity are the meter's, that it is "
                      "powered, and "
                      "that the line's two wires are not exchanged"};
      case MeterAnswer::garbled:
        return {link_->what(), "what comes is no answer to " + asked,
                tcp ? "see that it is Modbus TCP that is spoken there"
                    : "see that source.baud and source.parity are the meter's, and the line's shield and "
                      "terminators"};
      case MeterAnswer::refused_table:
        return {link_->what(), "the meter does not let " + asked + " be read",
                "see in its manual whether it has holding or input registers"};
      case MeterAnswer::refused_address:
        return {link_->what(), "the meter does not have " + asked,
                "see its manual for the address, and whether that is counted from 0, as here, or from 1"};
      case MeterAnswer::refused_unit:
        return {link_->what(), "the gateway knows no unit " + unit + ", or it does not answer",
                "see that source.unit is the meter's address and the meter is powered"};
      case MeterAnswer::refused:
        return {link_->what(), "the meter says that it cannot answer now", "see the meter's own display"};
      case MeterAnswer::gone:
      case MeterAnswer::values:
        break;
    }
    return gone();
  }

  [[nodiscard]] Error gone() const {
    if (settings_.link == config::PolledMeterSettings::Link::tcp)
      return {link_->what(), "the connection is gone", "see that the meter is powered and on the network"};
    return {link_->what(), "the serial port is gone", "see that the adapter is plugged in"};
  }

  /// The next time on the grid of readings that is still to come.
  void next_reading() {
    asking_ = 0;
    Arrival now;
    stamp(now);
    const std::int64_t late_ns = std::max<std::int64_t>(0, now.monotonic_ns - due_ns_);
    due_ns_ += (late_ns / every_ns_ + 1) * every_ns_;
  }

  Result<bool> take(Arrival& arrival) {
    stamp(arrival);
    // The meter answered some time between the question and the answer.
    const std::int64_t half_ns = (arrival.monotonic_ns - asked_.monotonic_ns) / 2;
    arrival.monotonic_ns -= half_ns;
    arrival.utc_ns -= half_ns;
    next_reading();
    arrival.values.resize(registers_.size());
    std::int64_t bytes = 0;
    bool readable = true;
    for (std::size_t r = 0; r < requests_.size(); ++r) {
      bytes += std::int64_t{2} * requests_[r].words;
      for (const std::size_t c : requests_[r].registers) {
        const double value = registers_[c].value(&words_[r][registers_[c].address - requests_[r].address]);
        arrival.values[c] = static_cast<float>(value);
        readable = readable && std::isfinite(arrival.values[c]);
      }
    }
    if (!readable) {
      unreadable_bytes_ += bytes;
      arrival.clear();
      return false;
    }
    arrival.frames = 1;
    arrival.first = (arrival.monotonic_ns - opened_ns_) / kNsPerMillisecond;
    return true;
  }

  config::PolledMeterSettings settings_;
  std::vector<config::ChannelSettings> channels_;
  std::int64_t every_ns_;
  std::vector<config::MeterRegister> registers_;  // by the site's channels
  std::optional<ModbusLink> link_;
  std::vector<MeterRequest> requests_;
  std::vector<std::vector<std::uint16_t>> words_;  // answers, by request
  std::size_t asking_ = 0;                         // request that comes next in this reading
  Arrival asked_;                                  // only its times: when the reading began
  std::int64_t opened_ns_ = 0;
  std::int64_t due_ns_ = 0;
  std::int64_t refused_before_ = 0;  // while the meter was being met
  std::int64_t unreadable_bytes_ = 0;
};

}  // namespace

std::unique_ptr<Device> make_polled_meter(const config::PolledMeterSettings& settings,
                                          std::vector<config::ChannelSettings> channels) {
  return std::make_unique<PolledMeter>(settings, std::move(channels));
}

}  // namespace tramline::acquire
