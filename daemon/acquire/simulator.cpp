#include "daemon/acquire/simulator.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <utility>
#include <vector>

#include "daemon/acquire/grid_model.hpp"
#include "daemon/acquire/noise.hpp"
#include "daemon/acquire/servo_model.hpp"

namespace tramline::acquire {
namespace {

constexpr std::size_t kChunk = GridModel::kChunk;

/// The servo's settings with what they leave to the site filled in.
config::ServoSettings complete(config::ServoSettings servo, const config::RegulatorSettings& regulator) {
  const auto fill = [](double& value, double from_site) {
    if (!(value > 0.0)) value = from_site;
  };
  fill(servo.target_v, regulator.target_v);
  fill(servo.comparator_low_v, regulator.band_low_v);
  fill(servo.comparator_high_v, regulator.band_high_v);
  fill(servo.ratio_min, regulator.ratio_min);
  fill(servo.ratio_max, regulator.ratio_max);
  return servo;
}

/// R.m.s. over the last cycle or so, a chunk at a time.
class CycleRms {
 public:
  CycleRms(double rate_hz, double nominal_hz, double start_v)
      : energies_(static_cast<std::size_t>(
                      std::max(1L, std::lround(rate_hz / nominal_hz / static_cast<double>(kChunk)))),
                  start_v * start_v * static_cast<double>(kChunk)) {}
  double take(const float* volts) {
    float energy = 0.0F;
    for (std::size_t i = 0; i < kChunk; ++i)
      energy += volts[i] * volts[i];
    energies_[next_] = static_cast<double>(energy);
    next_ = (next_ + 1) % energies_.size();
    double sum = 0.0;
    for (const double e : energies_)
      sum += e;
    return std::sqrt(sum / static_cast<double>(energies_.size() * kChunk));
  }

 private:
  std::vector<double> energies_;
  std::size_t next_ = 0;
};

class Simulator : public Source {
 public:
  Simulator(const config::SimulatorSettings& settings, const config::Site& site, UtcNs now)
      : settings_(settings), grid_(settings, site.nominal_v, site.nominal_hz, site.phases) {
    info_.rate_hz = settings.rate_hz;
    info_.begin = settings.begin.value_or(now);
    info_.what = "simulator, " + std::to_string(std::lround(settings.rate_hz)) + " samples a second, seed " +
                 std::to_string(settings.seed);
    info_.remarks.emplace_back("the samples are simulated: no supply was measured");
    if (settings.run_for_s > 0.0) info_.frames = std::llround(settings.run_for_s * settings.rate_hz);

    const double input_v = settings.grid.voltage_v > 0.0 ? settings.grid.voltage_v : site.nominal_v;
    Random random(settings.seed ^ 0x736572766fU);
    for (int p = 0; p < site.phases; ++p) {
      PhaseState& phase = phases_.emplace_back(
          PhaseState{{}, {}, CycleRms(settings.rate_hz, site.nominal_hz, input_v), {}, 1.0});
      if (site.regulator) {
        phase.servo.emplace(complete(settings.servo, *site.regulator), settings.script, site.nominal_v,
                            input_v, random.next());
        phase.gain = phase.servo->gain();
      }
    }
    for (const auto& channel : site.channels) {
      channels_.push_back(
          {channel, std::array<float, kChunk>{}, WhiteNoise(random.next(), settings.grid.sensor_noise_v)});
    }
  }

  [[nodiscard]] const StreamInfo& info() const override { return info_; }

  Result<bool> next(measure::Block& block, std::size_t most_frames) override {
    const std::int64_t left = info_.frames.value_or(std::numeric_limits<std::int64_t>::max()) - given_;
    const auto frames =
        static_cast<std::size_t>(std::min<std::int64_t>(left, static_cast<std::int64_t>(most_frames)));
    if (frames == 0) return false;
    block.resize(channels_.size(), frames);
    block.begin({given_});
    for (std::size_t done = 0; done < frames;) {
      if (used_ == kChunk) make_chunk();
      const std::size_t part = std::min(frames - done, kChunk - used_);
      for (std::size_t c = 0; c < channels_.size(); ++c) {
        std::copy_n(channels_[c].chunk.begin() + static_cast<std::ptrdiff_t>(used_), part,
                    block.channel(c).begin() + static_cast<std::ptrdiff_t>(done));
        note_over_range(block, c, done, part);
      }
      used_ += part;
      done += part;
    }
    given_ += static_cast<std::int64_t>(frames);
    return true;
  }

  [[nodiscard]] std::string end_remark() const override { return "the simulated time is over"; }

  [[nodiscard]] double progress() const override {
    return info_.frames ? static_cast<double>(given_) / static_cast<double>(*info_.frames) : 0.0;
  }

 private:
  struct PhaseState {
    std::array<float, kChunk> input;
    std::array<float, kChunk> output;
    CycleRms rms;
    std::optional<ServoModel> servo;
    double gain;  // at the end of the chunk before
  };
  struct ChannelState {
    config::ChannelSettings settings;
    std::array<float, kChunk> chunk;
    WhiteNoise noise;
  };

  void make_chunk() {
    std::array<float*, 3> inputs{};
    for (std::size_t p = 0; p < phases_.size(); ++p)
      inputs[p] = phases_[p].input.data();
    grid_.next(inputs);
    for (PhaseState& phase : phases_)
      regulate(phase);
    for (ChannelState& channel : channels_) {
      const PhaseState& phase = phases_[static_cast<std::size_t>(channel.settings.channel.phase)];
      const auto& ideal = channel.settings.channel.side == Side::input ? phase.input : phase.output;
      channel.chunk = ideal;
      channel.noise.add_to(channel.chunk.data(), kChunk);
      const auto scale = static_cast<float>(channel.settings.scale);
      const auto offset = static_cast<float>(channel.settings.offset);
      for (float& v : channel.chunk)
        v = (v + offset) * scale;
      const auto limit = static_cast<float>(channel.settings.range_v);
      if (limit > 0.0F) {
        for (float& v : channel.chunk)
          v = std::clamp(v, -limit, limit);
      }
    }
    used_ = 0;
  }

  void regulate(PhaseState& phase) {
    if (!phase.servo) {
      phase.output = phase.input;
      return;
    }
    phase.servo->advance(phase.rms.take(phase.input.data()), static_cast<double>(kChunk) / settings_.rate_hz);
    const auto from = static_cast<float>(phase.gain);
    phase.gain = phase.servo->gain();
    const float by = (static_cast<float>(phase.gain) - from) / static_cast<float>(kChunk);
    for (std::size_t i = 0; i < kChunk; ++i)
      phase.output[i] = (from + by * static_cast<float>(i)) * phase.input[i];
  }

  void note_over_range(measure::Block& block, std::size_t channel, std::size_t first,
                       std::size_t count) const {
    const auto limit = static_cast<float>(channels_[channel].settings.range_v);
    if (!(limit > 0.0F)) return;
    const auto volts = block.channel(channel);
    for (std::size_t i = first; i < first + count; ++i) {
      if (std::abs(volts[i]) >= limit) block.over_range.push_back({channel, i, 1});
    }
  }

  config::SimulatorSettings settings_;
  StreamInfo info_;
  GridModel grid_;
  std::vector<PhaseState> phases_;
  std::vector<ChannelState> channels_;
  std::size_t used_ = kChunk;  // of the chunk in hand
  std::int64_t given_ = 0;
};

}  // namespace

Result<std::unique_ptr<Source>> open_simulator(const config::SimulatorSettings& settings,
                                               const config::Site& site, UtcNs now) {
  if (!(settings.rate_hz > 0.0))
    return Error{"source.rate_hz", "the simulator has no sample rate", "give samples a second, such as 6400"};
  return std::unique_ptr<Source>(std::make_unique<Simulator>(settings, site, now));
}

}  // namespace tramline::acquire
