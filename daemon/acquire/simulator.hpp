#pragma once

#include <memory>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// A simulated site: the supply of GridModel and, where the site has a regulator, a ServoModel for each
/// phase, sampled on the site's channels. A site without regulator has its input at the output too.
///
/// The same settings and seed give the same samples, however many are asked for at a time. `next()` never
/// waits: keeping pace with the clock is the caller's business. `now`: begin of the simulation where the
/// settings give none.
[[nodiscard]] Result<std::unique_ptr<Source>> open_simulator(const config::SimulatorSettings& settings,
                                                             const config::Site& site, UtcNs now);

}  // namespace tramline::acquire
