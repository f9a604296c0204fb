#include "tools/wave_plot.hpp"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>
#include <iterator>
#include <span>

#include "config/time_text.hpp"
#include "daemon/measure/half_cycle_rms.hpp"
#include "tools/svg.hpp"
#include "tools/words.hpp"

namespace tramline::tools {
namespace {

constexpr double kWidth = 960.0;
constexpr double kPanelHeight = 250.0;
constexpr double kPanelGap = 34.0;
constexpr double kTop = 64.0;
constexpr double kBottom = 52.0;
constexpr double kLeft = 64.0;
constexpr double kRight = 190.0;

double seconds_between(UtcNs from, UtcNs to) {
  return static_cast<double>(to - from) / 1e9;
}

/// Maps seconds and volts to the paper for one panel.
struct Panel {
  double from_s;
  double to_s;
  double top;
  double peak_v;
  [[nodiscard]] double x(double s) const {
    return kLeft + (s - from_s) / (to_s - from_s) * (kWidth - kLeft - kRight);
  }
  [[nodiscard]] double y(double v) const { return top + (1.0 - v / peak_v) / 2.0 * kPanelHeight; }
  [[nodiscard]] double right() const { return kWidth - kRight; }
};

/// The voltage as a line; where there are more samples than pixels, lowest and highest of each pixel.
std::vector<std::pair<double, double>> outline(const std::vector<float>& volts, double rate_hz,
                                               const Panel& panel) {
  const auto columns = static_cast<std::size_t>(panel.right() - kLeft);
  const std::size_t a_column = std::max<std::size_t>(1, volts.size() / columns);
  std::vector<std::pair<double, double>> points;
  for (std::size_t i = 0; i < volts.size(); i += a_column) {
    const auto part = std::span(volts).subspan(i, std::min(a_column, volts.size() - i));
    const auto [low, high] = std::minmax_element(part.begin(), part.end());
    const double x = panel.x(panel.from_s + static_cast<double>(i) / rate_hz);
    if (a_column == 1) {
      points.emplace_back(x, panel.y(static_cast<double>(*low)));
      continue;
    }
    const bool falls = high < low;
    points.emplace_back(x, panel.y(static_cast<double>(falls ? *high : *low)));
    points.emplace_back(x, panel.y(static_cast<double>(falls ? *low : *high)));
  }
  return points;
}

void draw_line_at(Svg& svg, const Panel& panel, double volts, const Svg::Stroke& stroke,
                  const std::string& label, double& last_y) {
  const double y = panel.y(volts);
  svg.line(kLeft, y, panel.right(), y, stroke);
  // Labels keep a line's distance, from the highest voltage downwards.
  last_y = std::max(y + 4.0, last_y + 14.0);
  svg.text(panel.right() + 6.0, last_y, label, Svg::Anchor::start, 11.0);
}

void draw_limits(Svg& svg, const Panel& panel, const config::Site& site, Side side) {
  struct Limit {
    double volts;
    Svg::Stroke stroke;
    std::string label;
  };
  const Svg::Stroke threshold{"#222", 1.0, "7 4"};
  const Svg::Stroke edge{"#222", 1.0, "2 3"};
  const auto share = [&](double pct) { return pct / 100.0 * site.nominal_v; };
  std::vector<Limit> limits = {
      {share(site.events.swell_pct), threshold, "swell " + volts_text(share(site.events.swell_pct))},
      {share(site.events.sag_pct), threshold, "sag " + volts_text(share(site.events.sag_pct))},
      {share(site.events.interruption_pct), threshold,
       "interruption " + volts_text(share(site.events.interruption_pct))},
  };
  if (side == Side::output && site.regulator) {
    limits.push_back(
        {site.regulator->band_high_v, edge, "band, upper edge " + volts_text(site.regulator->band_high_v)});
    limits.push_back(
        {site.regulator->band_low_v, edge, "band, lower edge " + volts_text(site.regulator->band_low_v)});
  }
  std::sort(limits.begin(), limits.end(), [](const Limit& a, const Limit& b) { return a.volts > b.volts; });
  double last_y = 0.0;
  for (const Limit& limit : limits)
    draw_line_at(svg, panel, limit.volts, limit.stroke, limit.label, last_y);
}

void draw_axes(Svg& svg, const Panel& panel, bool with_times) {
  const Svg::Stroke grid{"#ddd", 0.8};
  for (const double v : axis_ticks(-panel.peak_v, panel.peak_v, 8)) {
    svg.line(kLeft, panel.y(v), panel.right(), panel.y(v), grid);
    svg.text(kLeft - 6.0, panel.y(v) + 4.0, fmt::format("{:.0f}", v), Svg::Anchor::end, 11.0);
  }
  svg.text(kLeft - 6.0, panel.top - 6.0, "V", Svg::Anchor::end, 11.0);
  const bool in_ms = panel.to_s - panel.from_s < 2.0;
  for (const double s : axis_ticks(panel.from_s, panel.to_s, 9)) {
    svg.line(panel.x(s), panel.top, panel.x(s), panel.top + kPanelHeight, grid);
    if (!with_times) continue;
    const std::string label = in_ms ? fmt::format("{:.0f}", s * 1000.0) : fmt::format("{:.1f}", s);
    svg.text(panel.x(s), panel.top + kPanelHeight + 16.0, label, Svg::Anchor::middle, 11.0);
  }
  if (with_times) {
    svg.text((kLeft + panel.right()) / 2.0, panel.top + kPanelHeight + 36.0,
             in_ms ? "milliseconds from the begin of the event" : "seconds from the begin of the event",
             Svg::Anchor::middle);
  }
}

void draw_trace(Svg& svg, const Panel& panel, const WaveTrace& trace, double rate_hz) {
  svg.polyline(outline(trace.volts, rate_hz, panel), {"#8a8a8a", 1.0});
  std::vector<std::pair<double, double>> steps;
  for (std::size_t i = 0; i < trace.half_cycles.size(); ++i) {
    const auto& point = trace.half_cycles[i];
    const double until = i + 1 < trace.half_cycles.size() ? trace.half_cycles[i + 1].at_s : point.until_s;
    steps.emplace_back(panel.x(panel.from_s + point.at_s), panel.y(point.u_rms_v));
    steps.emplace_back(panel.x(panel.from_s + until), panel.y(point.u_rms_v));
  }
  svg.polyline(steps, {"#000", 2.2});
}

void draw_mark(Svg& svg, const Panel& panel, double at_s, const std::string& label) {
  if (at_s < panel.from_s || at_s > panel.to_s) return;
  svg.line(panel.x(at_s), panel.top, panel.x(at_s), panel.top + kPanelHeight, {"#222", 1.2, "1 3"});
  svg.text(panel.x(at_s) + 4.0, panel.top + kPanelHeight - 6.0, label, Svg::Anchor::start, 11.0);
}

}  // namespace

std::vector<WaveTrace> traces_of(const storage::Waveform& waveform, const config::Site& site) {
  std::vector<WaveTrace> traces;
  for (const auto& stored : waveform.traces) {
    WaveTrace trace;
    trace.channel = stored.channel;
    for (const std::int16_t step : stored.steps)
      trace.volts.push_back(static_cast<float>(step) * stored.volts_per_step);

    measure::HalfCycleRms meter(waveform.rate_hz, site.nominal_hz, site.nominal_v, 0, 4096);
    std::vector<measure::HalfCycleValue> values;
    std::vector<measure::GridTick> ticks;
    meter.restart({0});
    for (std::size_t i = 0; i < trace.volts.size(); i += 4096) {
      meter.feed(std::span(trace.volts).subspan(i, std::min<std::size_t>(4096, trace.volts.size() - i)),
                 values, ticks);
    }
    meter.finish(values, ticks);
    for (const auto& value : values) {
      trace.half_cycles.push_back(
          {value.begin / waveform.rate_hz, value.end / waveform.rate_hz, value.u_rms_v});
    }
    traces.push_back(std::move(trace));
  }
  return traces;
}

std::string wave_svg(const storage::Waveform& waveform, const storage::Event& event, const config::Site& site,
                     bool undated) {
  const std::vector<WaveTrace> traces = traces_of(waveform, site);
  const auto panels = static_cast<double>(traces.size());
  const double height = kTop + panels * kPanelHeight + (panels - 1.0) * kPanelGap + kBottom;
  const std::string what = std::string(name_of(event.kind)) + " on the " + std::string(name_of(event.side));
  const std::string when =
      undated ? "undated, " + config::format_duration(event.begin.value) + " after the recording's begin"
              : config::format_in_zone(event.begin, site.zone);
  const std::string figures =
      volts_text(event.extreme_v) +
      (event.side == Side::input ? " at worst on the supply" : " at worst on the load") + ", for " +
      config::format_duration(event.duration_ns);
  Svg svg(kWidth, height, site.name + ": " + what,
          when + "; " + figures + ". Grey: voltage. Black steps: half-cycle r.m.s.");
  svg.text(kLeft, 24.0, site.name + ": " + what, Svg::Anchor::start, 16.0, true);
  svg.text(kLeft, 42.0,
           when + " \xC2\xB7 " + figures + " \xC2\xB7 grey: voltage, black steps: half-cycle r.m.s.");

  const double from_s = seconds_between(event.begin, waveform.begin);
  const double to_s = seconds_between(event.begin, waveform.end);
  for (std::size_t i = 0; i < traces.size(); ++i) {
    const WaveTrace& trace = traces[i];
    double peak = 1.05 * site.events.swell_pct / 100.0 * site.nominal_v;
    for (const float v : trace.volts)
      peak = std::max(peak, std::abs(static_cast<double>(v)));
    const Panel panel{from_s, to_s, kTop + static_cast<double>(i) * (kPanelHeight + kPanelGap), 1.08 * peak};
    svg.text(kLeft + 8.0, panel.top - 6.0,
             side_text(trace.channel.side) + ", " + std::string(name_of(trace.channel.phase)),
             Svg::Anchor::start, 12.0, true);
    draw_axes(svg, panel, i + 1 == traces.size());
    draw_trace(svg, panel, trace, waveform.rate_hz);
    draw_limits(svg, panel, site, trace.channel.side);
    draw_mark(svg, panel, 0.0, "begin");
    if (event.end_reason != storage::EventEnd::open)
      draw_mark(svg, panel, seconds_between(event.begin, event.end), "end");
    const Svg::Stroke frame{"#222", 1.0};
    svg.rectangle(kLeft, panel.top, panel.right() - kLeft, kPanelHeight, "none", &frame);
  }
  return std::move(svg).finish();
}

std::string wave_csv(const storage::Waveform& waveform, const storage::Event& event,
                     const config::Site& site) {
  const std::vector<WaveTrace> traces = traces_of(waveform, site);
  std::string csv = "time_from_event_begin_s";
  for (const WaveTrace& trace : traces) {
    const std::string name =
        std::string(name_of(trace.channel.side)) + "_" + std::string(name_of(trace.channel.phase));
    csv += "," + name + "_v," + name + "_half_cycle_rms_v";
  }
  csv += '\n';
  const double from_s = seconds_between(event.begin, waveform.begin);
  std::vector<std::size_t> next(traces.size(), 0);
  const std::size_t frames = traces.empty() ? 0 : traces.front().volts.size();
  for (std::size_t n = 0; n < frames; ++n) {
    const double t = static_cast<double>(n) / waveform.rate_hz;
    fmt::format_to(std::back_inserter(csv), "{:.7f}", from_s + t);
    for (std::size_t c = 0; c < traces.size(); ++c) {
      const auto& points = traces[c].half_cycles;
      while (next[c] < points.size() && points[next[c]].at_s <= t)
        ++next[c];
      fmt::format_to(std::back_inserter(csv), ",{:.3f},", traces[c].volts[n]);
      if (next[c] > 0 && t < points[next[c] - 1].until_s) {
        fmt::format_to(std::back_inserter(csv), "{:.3f}", points[next[c] - 1].u_rms_v);
      }
    }
    csv += '\n';
  }
  return csv;
}

}  // namespace tramline::tools
