#pragma once

#include <memory>
#include <vector>

#include "config/site.hpp"
#include "daemon/acquire/device.hpp"

namespace tramline::acquire {

/// A transducer that gives r.m.s. registers, through libmodbus (TCP and RTU). `channels` are the site's; each
/// names its register.
///
/// A reading is an arrival of one frame, whose number counts the milliseconds of the monotonic clock since
/// the opening. One that fails, or holds what is no number, is missing. `read()` may wait half a second,
/// which an answer may take, beyond what it is told.
[[nodiscard]] std::unique_ptr<Device> make_polled_meter(const config::PolledMeterSettings& settings,
                                                        std::vector<config::ChannelSettings> channels);

}  // namespace tramline::acquire
