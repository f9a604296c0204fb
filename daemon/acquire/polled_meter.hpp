#pragma once

#include <memory>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

/// A transducer that gives r.m.s. registers, through libmodbus (TCP and RTU).
/// `channels` are the site's; each names its channel of the device, or takes the next in order.
[[nodiscard]] std::unique_ptr<Device> make_polled_meter(const config::PolledMeterSettings& settings,
                                                        std::vector<config::ChannelSettings> channels);

}  // namespace tramline::acquire
