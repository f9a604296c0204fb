#pragma once

#include <memory>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// A text table as a source: one row a sample, columns parted by tab, semicolon or comma (whichever the first
/// row has), a header row or none, comment lines beginning with #. Where semicolons or tabs part the columns
/// a decimal comma is understood.
///
/// Time: with `rate_hz` there is no time column, unless one is named; else it is the one named, or the first.
/// It holds ISO 8601 instants with an offset, or seconds: from 1970 if they are above 1e8, else from the
/// recording's begin. The sample rate is that of the first two thousand rows; a step of more than one and a
/// half intervals is a gap, a step back an Error. Times rounded so coarsely that more than a tenth of the
/// steps are uneven are an Error too. Cells that are no number make their row missing.
[[nodiscard]] Result<std::unique_ptr<Source>> open_csv(const config::RecordingSettings& settings,
                                                       const std::vector<config::ChannelSettings>& channels);

}  // namespace tramline::acquire
