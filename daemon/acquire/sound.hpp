#pragma once

#include <memory>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

/// A sound interface through ALSA. `channels` are the site's; each names its channel of the device by its
/// number from 1, or takes the next in order. Values are ±1 at full scale.
[[nodiscard]] std::unique_ptr<Device> make_sound(const config::SoundSettings& settings,
                                                 std::vector<config::ChannelSettings> channels);

}  // namespace tramline::acquire
