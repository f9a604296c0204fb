#pragma once

#include <memory>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

/// A board or box that sends board frames over a serial line, TCP or UDP (BOARD-FRAMES.md).
/// `channels` are the site's; each names its channel of the device, or takes the next in order.
[[nodiscard]] std::unique_ptr<Device> make_board(const config::BoardSettings& settings,
                                                 std::vector<config::ChannelSettings> channels);

}  // namespace tramline::acquire
