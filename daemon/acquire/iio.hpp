#pragma once

#include <memory>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

/// A converter of the kernel's industrial I/O, through libiio (local and network contexts).
/// `channels` are the site's; each names its channel of the device, or takes the next in order.
[[nodiscard]] std::unique_ptr<Device> make_iio(const config::IioSettings& settings,
                                               std::vector<config::ChannelSettings> channels);

}  // namespace tramline::acquire
