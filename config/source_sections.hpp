#pragma once

#include "config/map_reader.hpp"
#include "config/site.hpp"
#include "config/site_sections.hpp"

namespace tramline::config {

/// Reads the section `source`: its `kind`, then the keys of that kind. After all other
/// sections, which it is checked against.
void read_source(MapReader& map, Site& site, SoundFigures sound);

}  // namespace tramline::config
