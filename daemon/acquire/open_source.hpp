#pragma once

#include <memory>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// Opens the source that the site file names. `now`: the wall clock, for sources that begin with the present.
/// An Error says what could not be opened and what to do. This is the one place that knows all backends.
[[nodiscard]] Result<std::unique_ptr<Source>> open_source(const config::Site& site, UtcNs now);

}  // namespace tramline::acquire
