#include "config/live_sections.hpp"

#include <cstdint>
#include <string>
#include <string_view>

#include "config/meter_register.hpp"

namespace tramline::config {
namespace {

constexpr std::size_t kLongestName = 200;

/// A whole number between `low` and `high`.
void whole(MapReader& map, std::string_view key, std::uint64_t& into, const NumberRule& rule,
           Absent absent = {}) {
  auto number = static_cast<double>(into);
  if (!map.number(key, number, rule, absent)) return;
  if (number != static_cast<double>(static_cast<std::uint64_t>(number))) {
    map.fault(key, "is " + plain_number(number), std::string(rule.noun) + " is a whole number");
    return;
  }
  into = static_cast<std::uint64_t>(number);
}

void read_port(MapReader& map, std::uint64_t& port, Absent absent = {}) {
  whole(map, "port", port, {"a port", 1.0, 65'535.0}, absent);
}

}  // namespace

IioSettings read_iio(MapReader& map) {
  IioSettings settings;
  map.text("context", settings.context, "libiio's address of the converter's machine", kLongestName);
  map.text("device", settings.device, "the name or id of the converter", kLongestName, kRequired);
  map.number("rate_hz", settings.rate_hz, {"the sample rate of the converter", 300.0, 1'000'000.0, "Hz"},
             absent_means("as the converter stands"));
  map.text("trigger", settings.trigger, "the name or id of the trigger", kLongestName,
           absent_means("as the converter stands"));
  whole(map, "block_frames", settings.block_frames, {"the length of a transfer", 16.0, 1'000'000.0, "frames"},
        absent_means("about 40 ms"));
  map.refuse_other_keys();
  return settings;
}

BoardSettings read_board(MapReader& map, BoardSettings::Link link) {
  BoardSettings settings;
  settings.link = link;
  switch (link) {
    case BoardSettings::Link::serial:
      map.text("device", settings.device, "the serial port", kLongestName, kRequired);
      whole(map, "baud", settings.baud, {"the speed of the line", 1200.0, 12'000'000.0, "baud"});
      break;
    case BoardSettings::Link::tcp:
      map.text("host", settings.host, "the box's name or address", kLongestName, kRequired);
      read_port(map, settings.port, kRequired);
      break;
    case BoardSettings::Link::udp:
      map.text("host", settings.host, "the address to listen on", kLongestName,
               absent_means("this machine only: 127.0.0.1"));
      read_port(map, settings.port, kRequired);
      break;
  }
  map.refuse_other_keys();
  return settings;
}

SoundSettings read_sound(MapReader& map) {
  SoundSettings settings;
  map.text("device", settings.device, "ALSA's name of the sound interface", kLongestName, kRequired);
  map.number("rate_hz", settings.rate_hz, {"the sample rate of a sound interface", 4000.0, 192'000.0, "Hz"});
  map.refuse_other_keys();
  return settings;
}

PolledMeterSettings read_polled_meter(MapReader& map, PolledMeterSettings::Link link, const Site& site) {
  PolledMeterSettings settings;
  settings.link = link;
  if (link == PolledMeterSettings::Link::tcp) {
    map.text("host", settings.host, "the meter's name or address", kLongestName, kRequired);
    read_port(map, settings.port);
  } else {
    map.text("device", settings.device, "the serial port", kLongestName, kRequired);
    whole(map, "baud", settings.baud, {"the speed of the line", 1200.0, 1'000'000.0, "baud"});
    map.word<PolledMeterSettings::Parity>("parity", settings.parity,
                                          {{"none", PolledMeterSettings::Parity::none},
                                           {"even", PolledMeterSettings::Parity::even},
                                           {"odd", PolledMeterSettings::Parity::odd}},
                                          "the parity");
  }
  whole(map, "unit", settings.unit, {"the meter's address", 0.0, 255.0});
  map.duration("every", settings.every_s, {"the distance of readings", 0.1, 60.0});
  map.refuse_other_keys();
  if (map.is_describing()) return settings;
  for (const ChannelSettings& channel : site.channels) {
    const auto named = parse_meter_register(channel.source_channel);
    if (named) continue;
    map.fault("kind",
              "asks a meter, but the channel " + std::string(name_of(channel.channel.side)) + " " +
                  std::string(name_of(channel.channel.phase)) + " has the source_channel " +
                  shown(channel.source_channel) + ": " + named.error().what,
              named.error().remedy);
  }
  return settings;
}

}  // namespace tramline::config
