#pragma once

#include "config/map_reader.hpp"
#include "config/site.hpp"

/// The keys of `source` for the kinds that sample as time goes: each function reads those of one kind.
namespace tramline::config {

[[nodiscard]] IioSettings read_iio(MapReader& map);
[[nodiscard]] BoardSettings read_board(MapReader& map, BoardSettings::Link link);
[[nodiscard]] SoundSettings read_sound(MapReader& map);
/// Checks too that each channel names its register.
[[nodiscard]] PolledMeterSettings read_polled_meter(MapReader& map, PolledMeterSettings::Link link,
                                                    const Site& site);

}  // namespace tramline::config
