#include "daemon/probe_findings.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <optional>
#include <utility>

namespace tramline {
namespace {

// Thresholds without a source beside them are common practice, no source.
constexpr double kLeastStretchS = 0.5;
constexpr double kDeadPct = 5.0;  // the interruption threshold of IEC 61000-4-30 practice
constexpr double kResolutionPct = 0.5;
constexpr double kNoiseMustPct = 5.0;
constexpr double kDcLookPct = 1.0;
constexpr double kDcMustPct = 10.0;  // raises r.m.s. by sqrt(1 + 0.1^2) - 1 = 0.5 %
constexpr double kOverRangeMustShare = 1e-3;
constexpr double kMissingMustShare = 0.01;
constexpr double kRateLookPpm = 100.0;
constexpr double kRateMustPpm = 10'000.0;
constexpr double kFrequencyLookPct = 2.0;
constexpr double kFrequencyMustPct = 15.0;  // IEC 61000-4-30, class A: 42.5 to 57.5 Hz, 51 to 69 Hz
constexpr double kOtherFrequencyPct = 2.0;
constexpr double kAngleTolerance = 15.0;  // degrees
constexpr double kSkewLook = 3.0;         // degrees
constexpr double kSkewWorthAWord = 0.1;   // degrees
constexpr double kSkewFit = 0.05;         // of the step from one channel to the next
constexpr double kRatioTolerance = 0.02;  // sensors that were not calibrated yet
constexpr double kSameRatio = 0.0005;
constexpr double kSameNoise = 0.9;
constexpr double kImpossiblePct = 125.0;  // must be put right even if it is the supply itself
constexpr double kPlainlyOff = 1.25;      // a factor that a supply's own ups and downs do not hide
constexpr double kClean = 0.98;           // share of the fundamental in the r.m.s. value

// A sine of peak A cut to half waves: mean A/pi, r.m.s. A/2; to full waves: mean 2A/pi, r.m.s. A/sqrt(2).
constexpr double kHalfWave = 2.0 / std::numbers::pi;                           // 0.637
constexpr double kFullWave = 2.0 * std::numbers::sqrt2 / std::numbers::pi;     // 0.900
constexpr double kHalfWaveSecondPct = 100.0 * 4.0 / (3.0 * std::numbers::pi);  // 42.4, of the fundamental
constexpr double kRectifiedWithin = 0.03;

/// A factor by which readings are usually wrong, and what would explain it.
struct UsualFactor {
  double factor;
  const char* why;
};
// An average-responding meter shows the mean of the rectified wave times pi / (2 sqrt 2), r.m.s. of a sine.
constexpr double kFormFactor = std::numbers::pi / (2.0 * std::numbers::sqrt2);  // 1.1107
constexpr std::array<UsualFactor, 15> kUsualFactors = {{
    {std::numbers::sqrt2, "a peak value had been taken for r.m.s. when the scale was found"},
    {1.0 / std::numbers::sqrt2, "an r.m.s. value had been taken for the peak when the scale was found"},
    {kFormFactor,
     "the form factor of a sine (1.111) had been counted twice, or for a sensor that is r.m.s. already"},
    {1.0 / kFormFactor,
     "the mean of an average-responding sensor had been taken for r.m.s. (1.111 left out)"},
    {std::numbers::sqrt3, "phase to phase had been taken for phase to neutral"},
    {1.0 / std::numbers::sqrt3, "phase to neutral had been taken for phase to phase"},
    {2.0, "the scale were twice too large (a ± range taken for one side of it)"},
    {0.5, "the scale were half of what it ought to be (one side of a ± range taken for the whole)"},
    {10.0, "the divider were 10 times what the scale says"},
    {0.1, "the scale were 10 times too small"},
    {100.0, "the scale were 100 times too large"},
    {0.01, "the scale were 100 times too small"},
    {1000.0, "millivolts had been taken for volts"},
    {0.001, "volts had been taken for millivolts"},
    {1000.0 * std::numbers::sqrt2, "peak millivolts had been taken for r.m.s. volts"},
}};

double angle_within(double degrees) {
  return std::remainder(degrees, 360.0);
}

bool near_angle(double degrees, double expected) {
  return std::abs(angle_within(degrees - expected)) <= kAngleTolerance;
}

/// 4 significant digits, as one writes them into a site file.
std::string plain(double number) {
  return fmt::format("{:.4g}", number);
}

class Judge {
 public:
  Judge(const config::Site& site, const ProbeFigures& figures)
      : site_(site),
        figures_(figures),
        angles_(figures.channels.size()),
        rectified_(figures.channels.size()) {
    for (std::size_t c = 0; c < figures.channels.size(); ++c)
      angles_[c] = figures.channels[c].angle_deg;
  }

  std::vector<Finding> findings() {
    length();
    for (std::size_t c = 0; c < figures_.channels.size(); ++c) {
      voltage(c);
      limits(c);
      rectified(c);
      dc(c);
      noise(c);
    }
    missing();
    line();
    rate();
    frequency();
    for (const Side side : {Side::input, Side::output})
      phases_of(side);
    phases_between_sides();
    skews();
    for (const PairFigures& pair : figures_.pairs)
      both_sides(pair);
    same_signals();
    for (std::size_t c = 0; c < figures_.channels.size(); ++c)
      level(c);
    not_judged();
    std::stable_sort(found_.begin(), found_.end(), [](const Finding& a, const Finding& b) {
      return std::pair(a.severity, a.matter) < std::pair(b.severity, b.matter);
    });
    return std::move(found_);
  }

 private:
  [[nodiscard]] const ChannelFigures& of(std::size_t c) const { return figures_.channels[c]; }
  [[nodiscard]] const config::ChannelSettings& settings(std::size_t c) const { return site_.channels[c]; }
  [[nodiscard]] std::string name(std::size_t c) const { return channel_name(site_, of(c).channel); }
  [[nodiscard]] double pct(double volts) const { return 100.0 * volts / site_.nominal_v; }
  [[nodiscard]] bool alive(std::size_t c) const { return pct(of(c).rms_v) >= kDeadPct && !of(c).constant; }
  [[nodiscard]] std::string volts_and_pct(double volts) const {
    return fmt::format("{} V ({:.3g} % of nominal)", plain(volts), pct(volts));
  }

  void find(Severity severity, Matter matter, std::vector<std::size_t> channels, std::string what,
            std::string remedy = {}) {
    what.front() = static_cast<char>(what.front() >= 'a' && what.front() <= 'z' ? what.front() - 'a' + 'A'
                                                                                : what.front());
    found_.push_back({severity, matter, std::move(channels), std::move(what), std::move(remedy)});
  }
  [[nodiscard]] bool has_found(Matter matter, std::size_t c) const {
    return std::any_of(found_.begin(), found_.end(), [&](const Finding& f) {
      return f.matter == matter && std::find(f.channels.begin(), f.channels.end(), c) != f.channels.end();
    });
  }

  // ---- is there anything, and enough of it

  void length() {
    if (figures_.readings || figures_.longest_stretch_s >= kLeastStretchS) return;
    find(Severity::must_be_fixed, Matter::too_short, {},
         fmt::format("the longest stretch without a gap is {:.2g} s; half a second at least is needed to "
                     "judge a waveform, so most of the figures are not to be trusted.",
                     figures_.longest_stretch_s),
         figures_.missing.gaps > 0 ? "Find out first why samples are missing; then probe again."
                                   : "Give a longer recording, or probe for longer.");
  }

  /// Usual factors that would bring `volts` between `low` and `high`, the one nearest to `aim` first.
  static std::vector<UsualFactor> fitting(double volts, double low, double high, double aim) {
    std::vector<UsualFactor> fits;
    for (const UsualFactor& usual : kUsualFactors) {
      const double right = volts / usual.factor;
      if (right >= low && right <= high) fits.push_back(usual);
    }
    const auto off = [&](const UsualFactor& usual) { return std::abs(std::log(volts / usual.factor / aim)); };
    std::sort(fits.begin(), fits.end(), [&](const auto& a, const auto& b) { return off(a) < off(b); });
    return fits;
  }

  [[nodiscard]] std::string would_fit(std::size_t c, const std::vector<UsualFactor>& fits) const {
    std::string text;
    for (const UsualFactor& usual : fits) {
      text += text.empty() ? "It would fit if " : "; or if ";
      text += fmt::format("{}: it would then be {} V", usual.why, plain(of(c).rms_v / usual.factor));
    }
    return text + ".";
  }
  [[nodiscard]] std::string with_scale(std::size_t c, const std::vector<UsualFactor>& fits) const {
    std::string scales;
    for (const UsualFactor& usual : fits)
      scales += (scales.empty() ? "" : ", or ") + plain(settings(c).scale / usual.factor);
    return fmt::format(
        "Compare with a meter. If the meter says so, the scale of the {} is to be {} instead of {}.", name(c),
        scales, plain(settings(c).scale));
  }

  void voltage(std::size_t c) {
    const ChannelFigures& channel = of(c);
    if (channel.constant) {
      find(Severity::must_be_fixed, Matter::dead, {c},
           fmt::format("the {} gives the same number in every sample, {} V: no signal arrives.", name(c),
                       plain(channel.dc_v != 0.0 ? channel.dc_v : channel.rms_v)),
           "See that source_channel names the right channel, that the sensor is powered, and that its "
           "converter runs.");
      return;
    }
    if (alive(c)) return;
    const bool clean = channel.wave && channel.wave->fundamental_v >= kClean * channel.rms_v &&
                       std::abs(channel.wave->hz / site_.nominal_hz - 1.0) < kFrequencyLookPct / 100.0;
    const auto fits =
        clean ? fitting(channel.rms_v, 0.9 * site_.nominal_v, 1.1 * site_.nominal_v, site_.nominal_v)
              : std::vector<UsualFactor>{};
    if (fits.empty()) {
      find(Severity::must_be_fixed, Matter::dead, {c},
           fmt::format("the {} reads {}: dead or not connected.", name(c), volts_and_pct(channel.rms_v)),
           "See that there is voltage (with a meter, not with this program), and that sensor, fuse and "
           "source_channel are the right ones.");
    } else {
      find(Severity::must_be_fixed, Matter::scale, {c},
           fmt::format("the {} reads {}, a clean sine. {} A sensor that is not connected and picks up hum "
                       "may look alike.",
                       name(c), volts_and_pct(channel.rms_v), would_fit(c, fits)),
           with_scale(c, fits));
    }
  }

  // ---- is the waveform sound

  void limits(std::size_t c) {
    const ChannelFigures& channel = of(c);
    if (!alive(c)) return;
    if (channel.over_range_frames > 0) {
      const double share =
          static_cast<double>(channel.over_range_frames) / static_cast<double>(figures_.frames);
      find(share > kOverRangeMustShare ? Severity::must_be_fixed : Severity::look_at_it, Matter::clipping,
           {c},
           fmt::format("the {} was at its limit {} times, {:.3g} % of the time; its peak reads {} V.",
                       name(c), channel.over_range_spans, 100.0 * share, plain(channel.peak_v)),
           "Use a sensor, a divider or a converter range with more room: a swell must fit as well, so the "
           "limit should lie at 1.5 times the nominal peak at least. Correct range_v if it is declared too "
           "low.");
      return;
    }
    const bool half_wave = std::abs(std::abs(channel.dc_v) / channel.rms_v - kHalfWave) < kRectifiedWithin;
    if (half_wave || (!channel.upper_limit && !channel.lower_limit)) return;
    const LimitFigures& limit = channel.upper_limit ? *channel.upper_limit : *channel.lower_limit;
    const bool both = channel.upper_limit && channel.lower_limit;
    find(Severity::must_be_fixed, Matter::clipping, {c},
         fmt::format("the {} is cut off at {} V{}: {} times up to {} samples in a row stood at exactly that "
                     "value, a limit that nobody declared.",
                     name(c), plain(limit.at_v),
                     both ? fmt::format(" and at {} V", plain(channel.lower_limit->at_v)) : std::string(),
                     limit.runs, limit.longest),
         "Turn down the gain before the converter, or use a divider or a converter range with more room; "
         "then declare the limit as range_v. Only where a simple inverter feeds the site may the wave itself "
         "be flat.");
  }

  void rectified(std::size_t c) {
    const ChannelFigures& channel = of(c);
    if (!alive(c) || !channel.wave) return;
    const double dc_share = std::abs(channel.dc_v) / channel.rms_v;
    const double hz_share = channel.wave->hz / site_.nominal_hz;
    const bool full = std::abs(dc_share - kFullWave) < kRectifiedWithin && std::abs(hz_share - 2.0) < 0.1;
    const bool half = std::abs(dc_share - kHalfWave) < kRectifiedWithin && std::abs(hz_share - 1.0) < 0.1 &&
                      std::abs(channel.wave->second_pct / kHalfWaveSecondPct - 1.0) < 0.25;
    rectified_[c] = full || half;
    if (!rectified_[c]) return;
    find(Severity::must_be_fixed, Matter::rectified, {c},
         fmt::format(
             "the {} shows {} waves of one sign: d.c. is {:.3f} of r.m.s. (a rectified sine has {:.3f}) and "
             "{}.",
             name(c), full ? "full" : "half", dc_share, full ? kFullWave : kHalfWave,
             full ? fmt::format("the frequency is {:.2f} Hz, twice the nominal", channel.wave->hz)
                  : fmt::format("the second harmonic is {:.3g} % (it has 42.4 %)", channel.wave->second_pct)),
         full ? "A rectifier stands before the converter. Use a sensor that gives the alternating wave "
                "itself, about a middle voltage that the converter can take."
              : "The converter takes one sign only, or a rectifier stands before it. Shift the sensor's wave "
                "to the middle of the converter's range, or use a converter for both signs.");
  }

  void dc(std::size_t c) {
    const ChannelFigures& channel = of(c);
    if (figures_.readings || !alive(c) || rectified_[c] || has_found(Matter::clipping, c)) return;
    const double share_pct = 100.0 * std::abs(channel.dc_v) / channel.rms_v;
    if (pct(std::abs(channel.dc_v)) <= kDcLookPct) return;
    find(share_pct > kDcMustPct ? Severity::must_be_fixed : Severity::look_at_it, Matter::dc, {c},
         fmt::format("the {} has {} V d.c., {:.3g} % of its r.m.s. value; a mains supply has next to none.",
                     name(c), plain(channel.dc_v), share_pct),
         fmt::format("Set the offset of the {} to {} instead of {}, if the d.c. is the same without voltage.",
                     name(c), plain(settings(c).offset - channel.dc_v / settings(c).scale),
                     plain(settings(c).offset)));
  }

  void noise(std::size_t c) {
    const ChannelFigures& channel = of(c);
    if (!alive(c) || !channel.wave || rectified_[c]) return;
    // Of a reading that is far too high, because its scale is, so is the noise.
    const double noise_pct = 100.0 * channel.wave->noise_v / std::max(site_.nominal_v, channel.rms_v);
    if (noise_pct <= kResolutionPct) return;
    const double step_pct = pct(channel.step_v);
    find(noise_pct > kNoiseMustPct ? Severity::must_be_fixed : Severity::look_at_it, Matter::noise, {c},
         fmt::format("the {} has a noise floor of {}; {} % is the resolution that is needed{}.", name(c),
                     volts_and_pct(channel.wave->noise_v), kResolutionPct,
                     step_pct > kResolutionPct
                         ? fmt::format(". The converter's steps are {} V", plain(channel.step_v))
                         : std::string()),
         step_pct > kResolutionPct
             ? "Use more of the converter's range: a smaller divider, more gain, or more bits."
             : "See to the sensor's supply, screening and earth of the signal lead, and that the signal uses "
               "most of the converter's range.");
  }

  // ---- is the stream sound

  void missing() {
    const MissingFigures& missing = figures_.missing;
    if (missing.gaps == 0) return;
    const double share =
        static_cast<double>(missing.frames) / static_cast<double>(missing.frames + figures_.frames);
    const char* remedy =
        missing.longest_cause == measure::GapCause::overrun
            ? "The device or this computer is too slow: lower the sample rate, or relieve the computer."
        : missing.longest_cause == measure::GapCause::not_a_number
            ? "The source gives no number there: see to the recording, or to the device's own messages."
        : missing.longest_cause == measure::GapCause::time_jump ||
                missing.longest_cause == measure::GapCause::rate_change
            ? "The recording's own time is not even: see how it was made."
            : "See to cable, connectors and hub; on a serial line to its speed; on a network to lost "
              "packets.";
    find(share > kMissingMustShare ? Severity::must_be_fixed : Severity::look_at_it, Matter::missing, {},
         fmt::format("{} {} missing in {} {}, {:.3g} % of all.", missing.frames,
                     figures_.readings ? "readings are" : "samples of each channel are", missing.gaps,
                     missing.gaps == 1 ? "gap" : "gaps", 100.0 * share),
         remedy);
  }

  void line() {
    if (figures_.refused_bytes == 0) return;
    find(Severity::look_at_it, Matter::line, {},
         fmt::format("{} bytes came that were no sound frame.", figures_.refused_bytes),
         "A few at the begin are natural. If probing again shows as many, see to the line's speed, cable and "
         "earth.");
  }

  void rate() {
    const RateFigures& rate = figures_.rate;
    if (!rate.measured_hz) return;
    const double off_ppm = 1e6 * (*rate.measured_hz / rate.nominal_hz - 1.0);
    if (std::abs(off_ppm) <= std::max(kRateLookPpm, rate.error_ppm)) return;
    const bool must = std::abs(off_ppm) > std::max(kRateMustPpm, rate.error_ppm);
    find(must ? Severity::must_be_fixed : Severity::look_at_it, Matter::rate, {},
         fmt::format("the device takes {:.2f} samples a second by this computer's clock, {:+.0f} ppm against "
                     "the {} it states (known to {:.0f} ppm).",
                     *rate.measured_hz, off_ppm, plain(rate.nominal_hz), rate.error_ppm),
         must ? "Correct the rate that the device states, or its divider: frequency and durations follow "
                "from it."
              : "The record's time follows the measured rate. Worth a look if the device claims a crystal: "
                "100 ppm are more than one has.");
  }

  void frequency() {
    struct Case {
      std::vector<std::size_t> channels;
      double hz = 0.0;
    };
    std::vector<Case> cases;  // channels that agree
    std::vector<std::size_t> without;
    for (std::size_t c = 0; c < figures_.channels.size(); ++c) {
      if (figures_.readings || !alive(c) || rectified_[c] || figures_.longest_stretch_s < kLeastStretchS)
        continue;
      if (!of(c).wave) {
        without.push_back(c);
        continue;
      }
      const double hz = of(c).wave->hz;
      const auto same =
          std::find_if(cases.begin(), cases.end(), [&](const Case& k) { return std::abs(k.hz - hz) < 0.05; });
      if (same == cases.end()) {
        cases.push_back({{c}, hz});
      } else {
        same->channels.push_back(c);
      }
    }
    for (const std::size_t c : without) {
      find(Severity::must_be_fixed, Matter::frequency, {c},
           fmt::format("the {} has {} but no wave between 20 and 140 Hz.", name(c),
                       volts_and_pct(of(c).rms_v)),
           "See that this is a mains signal and that the sample rate is the true one.");
    }
    for (const Case& k : cases)
      frequency(k.channels, k.hz);
    if (cases.size() > 1) {
      std::vector<std::size_t> all;
      for (const Case& k : cases)
        all.insert(all.end(), k.channels.begin(), k.channels.end());
      find(Severity::must_be_fixed, Matter::frequency, std::move(all),
           fmt::format("the {} has {:.3f} Hz and the {} {:.3f} Hz: they do not come from one supply.",
                       name(cases[0].channels[0]), cases[0].hz, name(cases[1].channels[0]), cases[1].hz),
           "See that both sensors are at the same regulator, and that nothing on its output makes a voltage "
           "of its own.");
    }
  }

  void frequency(const std::vector<std::size_t>& channels, double hz) {
    const double off_pct = 100.0 * (hz / site_.nominal_hz - 1.0);
    if (std::abs(off_pct) <= kFrequencyLookPct) return;
    const double other_hz = site_.nominal_hz > 55.0 ? 50.0 : 60.0;
    const auto near_to = [&](double expected) {
      return std::abs(hz / expected - 1.0) < kOtherFrequencyPct / 100.0;
    };
    std::string what = fmt::format("the {} has {:.3f} Hz where {} Hz are nominal", name(channels.front()), hz,
                                   plain(site_.nominal_hz));
    if (near_to(other_hz)) {
      find(Severity::must_be_fixed, Matter::frequency, channels,
           what + ": the other of the two mains frequencies.",
           fmt::format("Set frequency_hz to {}. Where the supply is known to have {} Hz, the sample rate is "
                       "stated wrong, {:.3g} times too high or low.",
                       plain(other_hz), plain(site_.nominal_hz),
                       std::max(hz, site_.nominal_hz) / std::min(hz, site_.nominal_hz)));
    } else if (near_to(2.0 * site_.nominal_hz) || near_to(0.5 * site_.nominal_hz)) {
      find(Severity::must_be_fixed, Matter::frequency, channels,
           fmt::format("{}: {}, and it is no rectified wave.", what,
                       hz > site_.nominal_hz ? "twice the nominal" : "half the nominal"),
           "It would fit if the sample rate were stated wrong by 2, as when two channels are counted as one. "
           "See to the rate and the number of channels of the device.");
    } else {
      const bool must = std::abs(off_pct) > kFrequencyMustPct;
      find(must ? Severity::must_be_fixed : Severity::look_at_it, Matter::frequency, channels,
           fmt::format("{}, {:+.2f} %.", what, off_pct),
           "A generator may run so; a public grid does not. Compare with a meter that shows frequency; if "
           "that is right, the sample rate is stated wrong.");
    }
  }

  // ---- are the sensors where the site file has them

  /// The channel of this side and phase if it has a wave to go by.
  [[nodiscard]] std::optional<std::size_t> channel_of(Side side, Phase phase) const {
    for (std::size_t c = 0; c < figures_.channels.size(); ++c) {
      if (of(c).channel == Channel{side, phase} && alive(c) && !rectified_[c] && angles_[c]) return c;
    }
    return std::nullopt;
  }

  [[nodiscard]] std::string turned(std::size_t c) const {
    return fmt::format("set the scale of the {} to {}", name(c), plain(-settings(c).scale));
  }

  /// Three phases of one side stand 120 degrees apart, L2 after L1.
  void phases_of(Side side) {
    const auto c1 = channel_of(side, Phase::l1);
    const auto c2 = channel_of(side, Phase::l2);
    const auto c3 = channel_of(side, Phase::l3);
    if (!c1 || !c2 || !c3) return;
    const std::array<std::size_t, 3> c = {*c1, *c2, *c3};
    const auto apart = [&](std::size_t from, std::size_t to) {
      return angle_within(*angles_[c[to]] - *angles_[c[from]]);
    };
    for (std::size_t i = 0; i < 3; ++i) {
      const std::size_t j = (i + 1) % 3;
      if (!near_angle(apart(i, j), 0.0)) continue;
      find(Severity::must_be_fixed, Matter::phases_confused, {c[i], c[j]},
           fmt::format("the {} and the {} are {:.1f} degrees apart where 120 are expected: both are on the "
                       "same phase.",
                       name(c[i]), name(c[j]), std::abs(apart(i, j))),
           "Put each sensor on its own phase.");
      return;
    }
    const auto turns = [&](double by) {
      return near_angle(apart(0, 1), by) && near_angle(apart(1, 2), by) && near_angle(apart(2, 0), by);
    };
    for (std::size_t flipped = 0; flipped < 3 && !turns(-120.0) && !turns(120.0); ++flipped) {
      *angles_[c[flipped]] += 180.0;
      if (turns(-120.0) || turns(120.0)) {
        find(Severity::must_be_fixed, Matter::reversed, {c[flipped]},
             fmt::format("the {} is the other way round: it stands 60 degrees from its neighbours where 120 "
                         "are expected.",
                         name(c[flipped])),
             fmt::format("Exchange the two leads of the sensor, or {}.", turned(c[flipped])));
      } else {
        *angles_[c[flipped]] -= 180.0;
      }
    }
    mirrored_[static_cast<std::size_t>(side)] = turns(120.0);
  }

  void phases_between_sides() {
    bool confused = false;
    for (const PairFigures& pair : figures_.pairs) {
      const Phase phase = of(pair.input).channel.phase;
      if (channel_of(Side::input, phase) != pair.input || channel_of(Side::output, phase) != pair.output ||
          !pair.skew_deg)
        continue;
      const double skew = angle_within(*angles_[pair.output] - *angles_[pair.input]);
      if (near_angle(skew, 180.0)) {
        find(Severity::must_be_fixed, Matter::reversed, {pair.input, pair.output},
             fmt::format(
                 "the {} and the {} are {:.1f} degrees apart: one of the two sensors is the other way round.",
                 name(pair.input), name(pair.output), std::abs(skew)),
             fmt::format("Exchange the two leads of one of the sensors, or {}. Its r.m.s. value is right all "
                         "the same.",
                         turned(pair.output)));
      } else if (near_angle(skew, 120.0) || near_angle(skew, -120.0) || near_angle(skew, 60.0) ||
                 near_angle(skew, -60.0)) {
        confused = true;
        const bool also_reversed = near_angle(skew, 60.0) || near_angle(skew, -60.0);
        std::string with;
        for (const Phase other : {Phase::l1, Phase::l2, Phase::l3}) {
          const auto c = channel_of(Side::input, other);
          if (!c || other == phase) continue;
          const double to = angle_within(*angles_[pair.output] - *angles_[*c]);
          if (near_angle(to, also_reversed ? 180.0 : 0.0))
            with = fmt::format(": it goes with the {}", name(*c));
        }
        find(Severity::must_be_fixed, Matter::phases_confused, {pair.input, pair.output},
             fmt::format("the {} stands {:+.1f} degrees from the {}{}{}.", name(pair.output), skew,
                         name(pair.input), with, also_reversed ? ", and the other way round" : ""),
             "Put both sensors on the same phase, or correct phase or source_channel of one of them.");
      }
    }
    for (const Side side : {Side::input, Side::output}) {
      const bool other = mirrored_[side == Side::input ? 1 : 0];
      if (!mirrored_[static_cast<std::size_t>(side)] || confused || (side == Side::output && other)) continue;
      find(Severity::look_at_it, Matter::phase_order, channels_of(side),
           fmt::format("on the {} side{} L3 follows L1 and L2 follows L3: the phases turn the other way.",
                       name_of(side), other ? " as on the output" : ""),
           "Nothing measured here depends on it. Where motors do, have the phase order tested; else exchange "
           "the phases of two channels in the site file.");
    }
  }

  [[nodiscard]] std::vector<std::size_t> channels_of(Side side) const {
    std::vector<std::size_t> channels;
    for (std::size_t c = 0; c < figures_.channels.size(); ++c) {
      if (of(c).channel.side == side) channels.push_back(c);
    }
    return channels;
  }

  /// How many conversions the output comes after the input, if its skew is that of a converter which takes
  /// its `channels` one after another; the later one then seems to lead.
  [[nodiscard]] std::optional<int> conversions_apart(double skew_us) const {
    const auto channels = static_cast<double>(figures_.channels.size());
    const double step_us = 1e6 / (channels * figures_.rate.nominal_hz);
    const double steps = std::round(skew_us / step_us);
    if (steps == 0.0 || std::abs(steps) > channels) return std::nullopt;
    if (std::abs(skew_us / step_us - steps) > kSkewFit) return std::nullopt;
    return static_cast<int>(steps);
  }

  void skews() {
    for (const PairFigures& pair : figures_.pairs) {
      if (!pair.skew_deg || !alive(pair.input) || !alive(pair.output)) continue;
      if (rectified_[pair.input] || rectified_[pair.output]) continue;
      if (has_found(Matter::reversed, pair.input) || has_found(Matter::reversed, pair.output) ||
          has_found(Matter::phases_confused, pair.output) || has_found(Matter::phases_confused, pair.input))
        continue;
      const double size = std::abs(*pair.skew_deg);
      if (size < kSkewWorthAWord) continue;
      const std::string what = fmt::format("the {} {} the {} by {:.3g} degrees ({:.3g} us)",
                                           name(pair.output), *pair.skew_deg > 0.0 ? "leads" : "lags",
                                           name(pair.input), size, std::abs(*pair.skew_us));
      if (const auto apart = conversions_apart(*pair.skew_us)) {
        const auto channels = static_cast<int>(figures_.channels.size());
        find(Severity::fine, Matter::skew, {pair.input, pair.output},
             fmt::format("{}, {} of a sample: it would fit a converter that takes its {} channels one after "
                         "another{}.",
                         what, fmt::format("{}/{}", std::abs(*apart), channels), channels,
                         std::abs(*apart) == channels ? ", or one channel a whole sample late" : ""),
             "R.m.s. values, events and frequency are right with it. Only a comparison of the two waveforms, "
             "sample by sample, is not.");
      } else if (size > kSkewLook) {
        find(Severity::look_at_it, Matter::skew, {pair.input, pair.output},
             fmt::format("{}; a servo regulator turns the phase by a degree or two at most{}.", what,
                         std::abs(size - 30.0) < 5.0 ? ". 30 degrees are between phase to neutral and phase "
                                                       "to phase, or across a star-delta transformer"
                                                     : ""),
             "See to filters that differ, to channels of two converters that are not started together, and "
             "to where each sensor is connected.");
      }
    }
  }

  void both_sides(const PairFigures& pair) {
    if (!alive(pair.input) || !alive(pair.output) || rectified_[pair.input] || rectified_[pair.output])
      return;
    const std::string in = name(pair.input);
    const std::string out = name(pair.output);
    const std::vector<std::size_t> both = {pair.input, pair.output};
    if (pair.identical) {
      find(Severity::must_be_fixed, Matter::same_signal, both,
           fmt::format("the {} and the {} carry the same number in every sample: it is one signal.", in, out),
           "See to source_channel of both, and to the converter's inputs.");
      return;
    }
    if (std::abs(pair.ratio - 1.0) < kSameRatio && pair.noise_correlation.value_or(0.0) > kSameNoise)
      same_.push_back(pair);
    if (!site_.regulator) return;
    const auto& regulator = *site_.regulator;
    const auto band = site_.tolerated_band();
    const auto reaches = [&](double ratio) {
      return ratio >= regulator.ratio_min * (1.0 - kRatioTolerance) &&
             ratio <= regulator.ratio_max * (1.0 + kRatioTolerance);
    };
    const bool possible = reaches(pair.ratio);
    const bool inverse = reaches(1.0 / pair.ratio);
    const bool band_says_so = band.holds(of(pair.input).rms_v) && !band.holds(of(pair.output).rms_v);
    if (inverse && (!possible || band_says_so)) {
      find(possible ? Severity::look_at_it : Severity::must_be_fixed, Matter::swapped, both,
           fmt::format("input and output would fit better the other way round: the {} reads {} V, the {} {} "
                       "V (band {:.1f} to {:.1f} V). U_out/U_in is {:.3f}, {} the declared {:.3f} to {:.3f}; "
                       "its inverse {:.3f} is within.",
                       in, plain(of(pair.input).rms_v), out, plain(of(pair.output).rms_v),
                       regulator.band_low_v, regulator.band_high_v, pair.ratio,
                       possible ? "within" : "outside", regulator.ratio_min, regulator.ratio_max,
                       1.0 / pair.ratio),
           possible ? "See which sensor is on which side. It would fit a regulator that does not work, too."
                    : "See which sensor is on which side; if they are exchanged, exchange side or "
                      "source_channel of the two channels.");
    }
    // Where the band does not say so as well, a wrong scale may explain the ratio as well.
    if (!possible && !band_says_so) impossible_.push_back(pair);
  }

  void same_signals() {
    if (same_.empty()) return;
    std::vector<std::size_t> channels;
    double apart = 0.0;
    double correlation = 1.0;
    for (const PairFigures& pair : same_) {
      channels.push_back(pair.input);
      channels.push_back(pair.output);
      apart = std::max(apart, std::abs(pair.ratio - 1.0));
      correlation = std::min(correlation, *pair.noise_correlation);
    }
    const bool in_band = std::all_of(same_.begin(), same_.end(), [&](const PairFigures& pair) {
      return !site_.regulator || site_.tolerated_band().holds(of(pair.output).rms_v);
    });
    std::string phases;
    for (const PairFigures& pair : same_) {
      phases += phases.empty() ? " of " : ", ";
      phases += tramline::name_of(of(pair.input).channel.phase);
    }
    find(Severity::look_at_it, Matter::same_signal, std::move(channels),
         fmt::format(
             "input and output{} read the same to {:.2g} %, and so does their noise (correlation {:.2f}). {}",
             site_.phases > 1 ? phases : std::string(), std::max(0.01, 100.0 * apart), correlation,
             in_band ? "Either the regulator rests at a ratio of 1 or is bypassed, or both sensors are on "
                       "one side of it; these figures cannot tell which."
                     : "The output is out of its band at that: the regulator is bypassed or stands still, or "
                       "both sensors are on one side of it; these figures cannot tell which."),
         "Probe again when the supply has moved by a few percent. If both readings moved alike, find out "
         "which sensor is on the wrong side.");
  }

  [[nodiscard]] bool in_impossible_pair(std::size_t c) const {
    return std::any_of(impossible_.begin(), impossible_.end(),
                       [c](const PairFigures& pair) { return pair.input == c || pair.output == c; });
  }

  /// Is the voltage what it ought to be, or would it be with a usual factor?
  void level(std::size_t c) {
    const ChannelFigures& channel = of(c);
    if (!alive(c) || rectified_[c] || has_found(Matter::clipping, c) || has_found(Matter::same_signal, c))
      return;
    if (has_found(Matter::swapped, c) && !in_impossible_pair(c)) return;
    const bool regulated = site_.regulator && channel.channel.side == Side::output;
    const auto expected =
        regulated ? site_.tolerated_band() : config::Site::Band{0.9 * site_.nominal_v, 1.1 * site_.nominal_v};
    const double aim = regulated ? site_.regulator->target_v : site_.nominal_v;
    auto fits = expected.holds(channel.rms_v) ? std::vector<UsualFactor>{}
                                              : fitting(channel.rms_v, expected.low_v, expected.high_v, aim);
    // A supply's own ups and downs hide the small factors; a regulator's output has a band to tell them by.
    if (!regulated)
      std::erase_if(
          fits, [](const UsualFactor& f) { return std::abs(std::log(f.factor)) < std::log(kPlainlyOff); });
    const bool must = pct(channel.rms_v) > kImpossiblePct || in_impossible_pair(c);
    if (!fits.empty()) {
      find(must ? Severity::must_be_fixed : Severity::look_at_it, Matter::scale, {c},
           fmt::format("the {} reads {}. {}{}", name(c), volts_and_pct(channel.rms_v), would_fit(c, fits),
                       must ? "" : " The voltage may honestly stand there, too."),
           with_scale(c, fits));
    } else if (pct(channel.rms_v) > kImpossiblePct) {
      find(Severity::must_be_fixed, Matter::scale, {c},
           fmt::format("the {} reads {}, and no usual factor explains it.", name(c),
                       volts_and_pct(channel.rms_v)),
           "Compare with a meter. If the meter says the same, disconnect what must not have so much; else "
           "find the scale anew.");
    } else if (regulated && !expected.holds(channel.rms_v) && !in_impossible_pair(c)) {
      find(Severity::look_at_it, Matter::out_of_band, {c},
           fmt::format("the {} reads {} V, outside its band of {:.1f} to {:.1f} V.", name(c),
                       plain(channel.rms_v), site_.regulator->band_low_v, site_.regulator->band_high_v),
           fmt::format("Compare with a meter. If the regulator holds its band by the meter, the scale of the "
                       "{} is off by about {:+.1f} %.",
                       name(c), 100.0 * (channel.rms_v / site_.regulator->target_v - 1.0)));
    }
  }

  void not_judged() {
    for (const PairFigures& pair : impossible_) {
      if (has_found(Matter::scale, pair.input) || has_found(Matter::scale, pair.output) ||
          has_found(Matter::swapped, pair.input))
        continue;
      find(Severity::must_be_fixed, Matter::ratio, {pair.input, pair.output},
           fmt::format("U_out/U_in is {:.3f}, outside the {:.3f} to {:.3f} that the {}'s regulator is "
                       "declared to reach; the inverse does not fit either.",
                       pair.ratio, site_.regulator->ratio_min, site_.regulator->ratio_max, name(pair.output)),
           "Compare both with a meter: either a scale is wrong, or the declared range.");
    }
    if (figures_.readings)
      find(Severity::fine, Matter::not_judged, {},
           "the source gives r.m.s. readings: waveform, polarity, phase, clipping and noise cannot be "
           "judged.");
    const bool input = site_.has(Side::input);
    const bool output = site_.has(Side::output);
    if (input != output)
      find(Severity::fine, Matter::not_judged, {},
           fmt::format("only the {} is measured: whether the sensor is on the right side and the right way "
                       "round, and what the ratio is, cannot be judged.",
                       input ? "input" : "output"));
    if (!site_.regulator && output)
      find(Severity::fine, Matter::not_judged, {},
           "no regulator is described: whether the ratio and the output's level fit it cannot be judged.");
  }

  const config::Site& site_;
  const ProbeFigures& figures_;
  std::vector<Finding> found_;
  std::vector<std::optional<double>> angles_;  // reversed sensors turned back
  std::vector<bool> rectified_;
  std::array<bool, 2> mirrored_{};
  std::vector<PairFigures> same_;        // ratio 1, same noise
  std::vector<PairFigures> impossible_;  // ratios out of reach, for which the band has no explanation
};

}  // namespace

std::string_view name_of(Severity severity) {
  switch (severity) {
    case Severity::must_be_fixed:
      return "must be fixed";
    case Severity::look_at_it:
      return "look at it";
    case Severity::fine:
      break;
  }
  return "fine";
}

std::string_view name_of(Matter matter) {
  switch (matter) {
    case Matter::too_short:
      return "too short";
    case Matter::dead:
      return "dead";
    case Matter::clipping:
      return "clipping";
    case Matter::rectified:
      return "rectified";
    case Matter::dc:
      return "d.c.";
    case Matter::noise:
      return "noise";
    case Matter::missing:
      return "missing samples";
    case Matter::line:
      return "line";
    case Matter::rate:
      return "sample rate";
    case Matter::frequency:
      return "frequency";
    case Matter::reversed:
      return "reversed";
    case Matter::phases_confused:
      return "phases confused";
    case Matter::phase_order:
      return "phase order";
    case Matter::skew:
      return "skew";
    case Matter::swapped:
      return "sides swapped";
    case Matter::same_signal:
      return "same signal";
    case Matter::ratio:
      return "ratio";
    case Matter::scale:
      return "scale";
    case Matter::out_of_band:
      return "out of band";
    case Matter::not_judged:
      break;
  }
  return "not judged";
}

std::string channel_name(const config::Site& site, const Channel& channel) {
  std::string name(name_of(channel.side));
  if (site.phases > 1) name += " " + std::string(tramline::name_of(channel.phase));
  return name;
}

std::vector<Finding> judged(const config::Site& site, const ProbeFigures& figures) {
  return Judge(site, figures).findings();
}

}  // namespace tramline
