#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "config/result.hpp"
#include "config/site.hpp"
#include "daemon/acquire/byte_reader.hpp"
#include "daemon/acquire/source.hpp"

namespace tramline::acquire {

/// What a COMTRADE configuration (IEEE C37.111-1991, -1999, -2013) says.
struct ComtradeConfig {
  enum class Data { ascii, binary16, binary32, float32 };
  struct Analog {
    std::string name;
    std::string phase;
    std::string unit;
    double a = 1.0;  ///< value = a * raw + b, in `unit`
    double b = 0.0;
    double primary = 1.0;
    double secondary = 1.0;
    double raw_max = 0.0;    ///< largest raw value, as stated
    bool is_primary = true;  ///< the side that a * raw + b gives
  };
  struct Section {
    double rate_hz = 0.0;
    std::int64_t last = 0;  ///< number, from 1, of its last row
  };
  std::string station;
  int revision = 1991;          ///< 1991, 1999 or 2013: how the file is read
  std::string stated_revision;  ///< as it stands in the file
  std::vector<Analog> analog;
  std::size_t status_channels = 0;
  std::vector<Section> sections;  ///< empty: the time stamps rule
  std::int64_t samples = 0;       ///< as many rows should be there
  std::optional<UtcNs> begin;     ///< of the first sample; nothing if the stamp cannot be read
  bool zone_known = false;        ///< 2013: the offset from UTC is stated
  bool nanosecond_stamps = false;
  double stamp_multiplier = 1.0;
  Data data = Data::ascii;
};

/// Reads the configuration from the lines of a .cfg file, or of the CFG section of a .cff, up to and not
/// including a line that begins with "---". Faults name file and line.
[[nodiscard]] Result<ComtradeConfig> read_comtrade_config(LineReader& lines);

/// A COMTRADE recording as a source, from its .cfg (the .dat is looked for beside it) or its .cff. raw is the
/// analog channel's own value in volts (kV and mV are converted), secondary unless the settings ask for
/// primary.
///
/// Sampling sections whose rate is within 5 % of the longest one's are one stream with a clock anchor each;
/// sections at another rate are left out as a gap, and a remark says so. A .dat that is shorter than its .cfg
/// promises ends early, and says so.
[[nodiscard]] Result<std::unique_ptr<Source>> open_comtrade(
    const config::RecordingSettings& settings, const std::vector<config::ChannelSettings>& channels);

}  // namespace tramline::acquire
