#include "daemon/probe_report.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>
#include <functional>
#include <nlohmann/json.hpp>
#include <optional>
#include <string_view>

namespace tramline {
namespace {

constexpr std::size_t kLineWidth = 96;
constexpr std::string_view kNotMeasured = "-";

constexpr const char* kCautions[] = {
    "Mains voltage kills. Sensors are wired only by people who are competent and, where the law asks for it, "
    "licensed, by local codes and the makers' instructions. Isolate, lock off, and prove dead with a tester "
    "that was itself proved before and after.",
    "The front end must carry the measurement category of its place (IEC 61010): CAT II at socket outlets, "
    "CAT III in the building's fixed wiring, CAT IV at the service entrance; each live sense lead needs a "
    "fuse of high breaking capacity close to the tap.",
    "A resistive divider alone does not isolate, and neither does an autotransformer: between the mains and "
    "anything that can be touched there must be reinforced insulation.",
    "A reading near 0 V here does not mean that a conductor is dead. These figures are from sensors that may "
    "not have been calibrated."};

/// `text` in lines of at most 96 characters, the first after `lead`, the others indented as far.
std::string wrapped(std::string_view lead, std::string_view text) {
  std::string out(lead);
  std::size_t width = lead.size();
  bool begun = false;
  while (!text.empty()) {
    const std::size_t end = std::min(text.find(' '), text.size());
    const std::string_view word = text.substr(0, end);
    text.remove_prefix(std::min(end + 1, text.size()));
    if (word.empty()) continue;
    if (begun && width + 1 + word.size() > kLineWidth) {
      out += "\n" + std::string(lead.size(), ' ');
      width = lead.size();
    } else if (begun) {
      out += ' ';
      ++width;
    }
    out += word;
    width += word.size();
    begun = true;
  }
  return out + "\n";
}

std::string text_of(const std::optional<double>& figure, int decimals) {
  if (!figure) return std::string(kNotMeasured);
  const double unit = std::pow(10.0, decimals);
  return fmt::format("{:.{}f}", std::round(*figure * unit) / unit + 0.0, decimals);  // + 0.0: no "-0.00"
}

std::string side_by_side(std::string_view what, std::string_view unit,
                         const std::vector<std::string>& figures) {
  std::string line = fmt::format("  {:<16}{:>6}", what, unit);
  for (const std::string& figure : figures)
    line += fmt::format("{:>12}", figure);
  return line + "\n";
}

std::string table(const config::Site& site, const ProbeFigures& figures) {
  using Of = std::function<std::string(const ChannelFigures&)>;
  const auto row = [&](std::string_view what, std::string_view unit, const Of& of) {
    std::vector<std::string> cells;
    for (const ChannelFigures& channel : figures.channels)
      cells.push_back(of(channel));
    return side_by_side(what, unit, cells);
  };
  // A figure of the waveform, or none.
  const auto wave = [](double WaveFigures::*member, int decimals) {
    return [member, decimals](const ChannelFigures& channel) {
      return text_of(channel.wave ? std::optional((*channel.wave).*member) : std::nullopt, decimals);
    };
  };
  const auto sampled = [&](double ChannelFigures::*member, int decimals) {
    return [&figures, member, decimals](const ChannelFigures& channel) {
      return text_of(figures.readings ? std::nullopt : std::optional(channel.*member), decimals);
    };
  };
  int highest = 0;
  for (const ChannelFigures& channel : figures.channels)
    if (channel.wave) highest = std::max(highest, channel.wave->highest_order);

  std::string out = row("", "", [&](const auto& channel) { return channel_name(site, channel.channel); });
  out += row("r.m.s.", "V", [](const auto& channel) { return fmt::format("{:.2f}", channel.rms_v); });
  out += row("fundamental", "V", wave(&WaveFigures::fundamental_v, 2));
  out += row("frequency", "Hz", wave(&WaveFigures::hz, 3));
  out += row("angle", "deg", [](const auto& channel) { return text_of(channel.angle_deg, 2); });
  out += row("d.c.", "V", sampled(&ChannelFigures::dc_v, 3));
  out += row("peak", "V", sampled(&ChannelFigures::peak_v, 1));
  out += row("crest factor", "", sampled(&ChannelFigures::crest, 3));
  out += row(highest > 0 ? fmt::format("THD, 2 to {}", highest) : "THD", "%", wave(&WaveFigures::thd_pct, 2));
  out += row("noise floor", "V", wave(&WaveFigures::noise_v, 3));
  out += row("at its limit", "%", [&](const ChannelFigures& channel) {
    if (figures.readings || figures.frames == 0) return std::string(kNotMeasured);
    return fmt::format("{:.3g}", 100.0 * static_cast<double>(channel.over_range_frames) /
                                     static_cast<double>(figures.frames));
  });
  return out;
}

std::string pair_line(const config::Site& site, const ProbeFigures& figures, const PairFigures& pair) {
  const std::string phase = site.phases > 1
                                ? " of " + std::string(name_of(figures.channels[pair.input].channel.phase))
                                : std::string();
  std::string line = fmt::format("U_out/U_in{}: {:.4f}", phase, pair.ratio);
  if (pair.skew_deg && std::abs(*pair.skew_deg) < 0.001)
    line += "; in phase";
  else if (pair.skew_deg)
    line += fmt::format("; the output's fundamental {} by {:.3f} degrees ({:.1f} us)",
                        *pair.skew_deg < 0.0 ? "lags" : "leads", std::abs(*pair.skew_deg),
                        std::abs(*pair.skew_us));
  return line;
}

std::string rate_line(const RateFigures& rate) {
  if (!rate.measured_hz)
    return fmt::format("sample rate: {:g} Hz as stated; the true one was not measured", rate.nominal_hz);
  return fmt::format(
      "sample rate: {:.2f} Hz by this computer's clock, {:+.0f} ppm (known to {:.0f} ppm) against {:g} Hz",
      *rate.measured_hz, 1e6 * (*rate.measured_hz / rate.nominal_hz - 1.0), rate.error_ppm, rate.nominal_hz);
}

std::size_t count_of(const std::vector<Finding>& findings, Severity severity) {
  return static_cast<std::size_t>(std::count_if(
      findings.begin(), findings.end(), [severity](const Finding& f) { return f.severity == severity; }));
}

std::string closing(const std::vector<Finding>& findings) {
  const std::size_t must = count_of(findings, Severity::must_be_fixed);
  const std::size_t look = count_of(findings, Severity::look_at_it);
  if (must > 0)
    return fmt::format("{} {} must be fixed before anyone trusts this site's figures.", must,
                       must == 1 ? "thing" : "things");
  return fmt::format("Nothing must be fixed{}. Whether the volts are true only a reference meter can say.",
                     look == 0   ? std::string()
                     : look == 1 ? std::string(", one thing is worth a look")
                                 : fmt::format(", {} things are worth a look", look));
}

}  // namespace

std::string probe_text(const config::Site& site, const acquire::StreamInfo& info, const ProbeFigures& figures,
                       const std::vector<Finding>& findings) {
  std::string out = "Before anyone touches a wire\n";
  for (const char* caution : kCautions)
    out += wrapped("  - ", caution);

  out += fmt::format("\n{}: {:g} V, {:g} Hz", site.name, site.nominal_v, site.nominal_hz);
  if (site.regulator)
    out += fmt::format("; band {:.1f} to {:.1f} V, ratio {:.3f} to {:.3f}", site.regulator->band_low_v,
                       site.regulator->band_high_v, site.regulator->ratio_min, site.regulator->ratio_max);
  out += "\n" + wrapped("", info.what);
  for (const std::string& remark : info.remarks)
    out += wrapped("  ", remark);
  out += fmt::format("{:.1f} s, {} {}\n\n", figures.seconds, figures.frames,
                     figures.readings ? "readings" : "samples of each channel");
  out += table(site, figures) + "\n";
  for (const PairFigures& pair : figures.pairs)
    out += wrapped("  ", pair_line(site, figures, pair));
  if (!figures.readings) out += wrapped("  ", rate_line(figures.rate));
  out += figures.missing.gaps == 0 ? "  nothing is missing\n"
                                   : fmt::format("  missing: {} in {} gap{}\n", figures.missing.frames,
                                                 figures.missing.gaps, figures.missing.gaps == 1 ? "" : "s");

  out += "\nFindings\n";
  if (findings.empty()) out += "  none\n";
  for (const Finding& finding : findings) {
    out += wrapped(fmt::format("  {:<15}", finding.severity == Severity::must_be_fixed
                                               ? std::string("MUST BE FIXED")
                                               : std::string(name_of(finding.severity))),
                   finding.what);
    if (!finding.remedy.empty()) out += wrapped(std::string(17, ' '), finding.remedy);
  }
  return out + "\n" + wrapped("", closing(findings));
}

std::string probe_json(const config::Site& site, const acquire::StreamInfo& info, const ProbeFigures& figures,
                       const std::vector<Finding>& findings) {
  using nlohmann::ordered_json;
  const auto or_null = [](const auto& figure) {
    return figure ? ordered_json(*figure) : ordered_json(nullptr);
  };
  const auto sampled = [&](double figure) {
    return figures.readings ? ordered_json(nullptr) : ordered_json(figure);
  };
  const auto limit = [](const std::optional<LimitFigures>& l) {
    return l ? ordered_json{{"at_v", l->at_v}, {"runs", l->runs}, {"longest_samples", l->longest}}
             : ordered_json(nullptr);
  };
  ordered_json json;
  json["site"] = site.name;
  json["source"] = info.what;
  json["must_be_fixed"] = count_of(findings, Severity::must_be_fixed);
  json["look_at_it"] = count_of(findings, Severity::look_at_it);
  json["measured_s"] = figures.seconds;
  json["frames"] = figures.frames;
  json["readings"] = figures.readings;
  json["channels"] = ordered_json::array();
  for (const ChannelFigures& channel : figures.channels) {
    ordered_json of;
    of["side"] = name_of(channel.channel.side);
    of["phase"] = name_of(channel.channel.phase);
    of["rms_v"] = channel.rms_v;
    of["dc_v"] = sampled(channel.dc_v);
    of["peak_v"] = sampled(channel.peak_v);
    of["crest_factor"] = sampled(channel.crest);
    of["angle_deg"] = or_null(channel.angle_deg);
    of["wave"] = nullptr;
    if (const auto& wave = channel.wave)
      of["wave"] = {{"frequency_hz", wave->hz},
                    {"fundamental_v", wave->fundamental_v},
                    {"thd_pct", wave->thd_pct},
                    {"thd_highest_order", wave->highest_order},
                    {"second_harmonic_pct", wave->second_pct},
                    {"noise_v", wave->noise_v}};
    of["over_range"] = {{"spans", channel.over_range_spans}, {"frames", channel.over_range_frames}};
    of["upper_limit"] = limit(channel.upper_limit);
    of["lower_limit"] = limit(channel.lower_limit);
    of["constant"] = channel.constant;
    json["channels"].push_back(std::move(of));
  }
  json["pairs"] = ordered_json::array();
  for (const PairFigures& pair : figures.pairs)
    json["pairs"].push_back({{"phase", name_of(figures.channels[pair.input].channel.phase)},
                             {"ratio", pair.ratio},
                             {"skew_deg", or_null(pair.skew_deg)},
                             {"skew_us", or_null(pair.skew_us)},
                             {"noise_correlation", or_null(pair.noise_correlation)}});
  json["missing"] = {{"gaps", figures.missing.gaps}, {"frames", figures.missing.frames}};
  json["rate"] = {{"stated_hz", figures.rate.nominal_hz},
                  {"measured_hz", or_null(figures.rate.measured_hz)},
                  {"known_to_ppm",
                   figures.rate.measured_hz ? ordered_json(figures.rate.error_ppm) : ordered_json(nullptr)}};
  json["refused_bytes"] = figures.refused_bytes;
  json["findings"] = ordered_json::array();
  for (const Finding& finding : findings) {
    ordered_json channels = ordered_json::array();
    for (const std::size_t c : finding.channels)
      channels.push_back(std::string(name_of(figures.channels[c].channel.side)) + "." +
                         std::string(name_of(figures.channels[c].channel.phase)));
    json["findings"].push_back({{"severity", name_of(finding.severity)},
                                {"matter", name_of(finding.matter)},
                                {"channels", std::move(channels)},
                                {"what", finding.what},
                                {"remedy", finding.remedy}});
  }
  return json.dump(2, ' ', false, ordered_json::error_handler_t::replace) + "\n";
}

}  // namespace tramline
