#include "daemon/acquire/open_source.hpp"

#include <variant>

#include "daemon/acquire/board.hpp"
#include "daemon/acquire/iio.hpp"
#include "daemon/acquire/live_source.hpp"
#include "daemon/acquire/polled_meter.hpp"
#include "daemon/acquire/recording.hpp"
#include "daemon/acquire/simulator.hpp"
#include "daemon/acquire/sound.hpp"

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
    Result<std::unique_ptr<Source>> operator()(const config::IioSettings& settings) const {
      return live(make_iio(settings, site.channels));
    }
    Result<std::unique_ptr<Source>> operator()(const config::BoardSettings& settings) const {
      return live(make_board(settings, site.channels));
    }
    Result<std::unique_ptr<Source>> operator()(const config::SoundSettings& settings) const {
      return live(make_sound(settings, site.channels));
    }
    Result<std::unique_ptr<Source>> operator()(const config::PolledMeterSettings& settings) const {
      return live(make_polled_meter(settings, site.channels));
    }
    [[nodiscard]] std::unique_ptr<Source> live(std::unique_ptr<Device> device) const {
      return std::make_unique<LiveSource>(std::move(device), site.channels);
    }
  };
  return std::visit(Opener{site, now}, site.source);
}

}  // namespace tramline::acquire
