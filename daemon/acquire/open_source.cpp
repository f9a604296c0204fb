#include "daemon/acquire/open_source.hpp"

#include <variant>

#include "daemon/acquire/recording.hpp"
#include "daemon/acquire/simulator.hpp"

namespace tramline::acquire {

Result<std::unique_ptr<Source>> open_source(const config::Site& site, UtcNs now) {
  struct Opener {
    const config::Site& site;
    UtcNs now;
    Result<std::unique_ptr<Source>> operator()(const config::SimulatorSettings& settings) const {
      return open_simulator(settings, site, now);
    }
    Result<std::unique_ptr<Source>> operator()(const config::RecordingSettings& settings) const {
      return open_recording(settings, site.channels);
    }
  };
  return std::visit(Opener{site, now}, site.source);
}

}  // namespace tramline::acquire
