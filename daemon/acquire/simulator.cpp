#include "daemon/acquire/simulator.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <iterator>
#include <limits>
#include <optional>
#include <utility>
#include <vector>

#include "daemon/acquire/grid_model.hpp"
#include "daemon/acquire/noise.hpp"
#include "daemon/acquire/servo_model.hpp"

namespace tramline::acquire {
namespace {

constexpr std::size_t kChunk = GridModel::kChunk;
constexpr std::size_t kServoStep = 8;  // frames: about a millisecond at the usual rates
static_assert(kChunk % kServoStep == 0);

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

/// What the script holds for the servo of one phase.
std::vector<config::ScriptedHappening> script_of(const std::vector<config::ScriptedHappening>& script,
                                                 Phase phase) {
  std::vector<config::ScriptedHappening> own;
  std::copy_if(script.begin(), script.end(), std::back_inserter(own), [phase](const auto& happening) {
    const auto& phases = happening.phases;
    return phases.empty() || std::find(phases.begin(), phases.end(), phase) != phases.end();
  });
  return own;
}

/// R.m.s. over the last cycle.
class CycleRms {
 public:
  CycleRms(double rate_hz, double nominal_hz, double start_v)
      : frames_(rate_hz / nominal_hz),
        squares_(static_cast<std::size_t>(frames_) + 1, static_cast<float>(start_v * start_v)),
        whole_(start_v * start_v * std::floor(frames_)) {}
  /// With the next kServoStep samples.
  double take(const float* volts) {
    for (std::size_t i = 0; i < kServoStep; ++i) {
      const float square = volts[i] * volts[i];
      squares_[oldest_] = square;
      oldest_ = oldest_ + 1 == squares_.size() ? 0 : oldest_ + 1;
      whole_ += static_cast<double>(square) - static_cast<double>(squares_[oldest_]);
    }
    const double part = (frames_ - std::floor(frames_)) * static_cast<double>(squares_[oldest_]);
    return std::sqrt(std::max(0.0, whole_ + part) / frames_);
  }

 private:
  double frames_;               // in a cycle
  std::vector<float> squares_;  // the last ones; of the oldest the part counts that is still in the cycle
  double whole_;                // sum of all but the oldest
  std::size_t oldest_ = 0;
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

    Random random(settings.seed ^ 0x736572766fU);
    for (std::size_t p = 0; p < static_cast<std::size_t>(site.phases); ++p) {
      const double input_v = grid_.rms_v(p);
      PhaseState& phase = phases_.emplace_back(
          PhaseState{{}, {}, CycleRms(settings.rate_hz, site.nominal_hz, input_v), {}, 1.0});
      if (site.regulator) {
        phase.servo.emplace(complete(settings.servo, *site.regulator),
                            script_of(settings.script, static_cast<Phase>(p)), site.nominal_v, input_v,
                            random.next());
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
    double gain;  // at the end of the step before
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
    for (std::size_t first = 0; first < kChunk; first += kServoStep) {
      const float* input = phase.input.data() + first;
      float* output = phase.output.data() + first;
      phase.servo->advance(phase.rms.take(input), static_cast<double>(kServoStep) / settings_.rate_hz);
      const auto from = static_cast<float>(phase.gain);
      phase.gain = phase.servo->gain();
      const float by = (static_cast<float>(phase.gain) - from) / static_cast<float>(kServoStep);
      for (std::size_t i = 0; i < kServoStep; ++i)
        output[i] = (from + by * static_cast<float>(i)) * input[i];
    }
  }

  void note_over_range(measure::Block& block, std::size_t channel, std::size_t first,
                       std::size_t count) const {
    const auto limit = static_cast<float>(channels_[channel].settings.range_v);
    if (!(limit > 0.0F)) return;
    const auto volts = block.channel(channel);
    for (std::size_t i = first; i < first + count; ++i) {
      if (std::abs(volts[i]) < limit) continue;
      auto& spans = block.over_range;
      if (!spans.empty() && spans.back().channel == channel &&
          spans.back().first_frame + spans.back().frames == i)
        ++spans.back().frames;
      else
        spans.push_back({channel, i, 1});
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
  for (const auto& channel : site.channels) {
    if (static_cast<int>(channel.channel.phase) < site.phases) continue;
    return Error{"channels", "a channel is on a phase that the site does not have",
                 "set phases to 3 or leave the channel out"};
  }
  return std::unique_ptr<Source>(std::make_unique<Simulator>(settings, site, now));
}

}  // namespace tramline::acquire
