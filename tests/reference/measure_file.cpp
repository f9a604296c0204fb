/// Runs the measurement core over a file of samples and prints what it says, for checks from outside.
///
/// The file holds interleaved 32-bit floats, volts, in the machine's byte order. The output is CSV, one line
/// an item, the first field telling what it is; positions are in samples from the file's begin, times in UTC
/// nanoseconds:
///
///     half_cycle,CHANNEL,BEGIN,END,U_RMS_V,FREE_RUNNING,OVER_RANGE
///     event,SIDE,KIND,BEGIN,END,DURATION_NS,EXTREME_V,PHASES,END_REASON,EXTREME_IS_BOUND
///     aggregate,INTERVAL,CHANNEL,BEGIN_NS,END_NS,U_RMS_V,U_MIN_V,U_MAX_V,BLOCKS,MEASURED_NS,FLAGGED,PARTIAL,OVER_RANGE
///     frequency,BEGIN_NS,END_NS,HZ,CYCLES,TRUSTED,FLAGGED
///     coverage_begin,BEGIN_NS,SAMPLE,WHY
///     coverage_end,END_NS,MEASURED_NS,WHY
///
/// Numbers have all their digits, so two outputs are equal only if the records are equal to the bit.

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <cstdio>
#include <fstream>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include <CLI/CLI.hpp>

#include "config/site.hpp"
#include "daemon/measure/block.hpp"
#include "daemon/measure/meter.hpp"
#include "storage/records.hpp"

namespace {

using namespace tramline;

struct Options {
  std::string path;
  std::vector<std::string> channels = {"input.L1"};
  double rate_hz = 6400.0;
  double nominal_hz = 50.0;
  double nominal_v = 230.0;
  std::int64_t begin_ns = 0;
  config::EventSettings events;
  std::size_t block_frames = 1000;
  std::vector<std::size_t> lost;  // first frame, count
  double range_v = 0.0;
  bool no_half_cycles = false;
};

std::optional<Channel> channel_named(const std::string& name) {
  for (const Side side : {Side::input, Side::output}) {
    for (const Phase phase : {Phase::l1, Phase::l2, Phase::l3}) {
      if (name == std::string(name_of(side)) + "." + std::string(name_of(phase))) return Channel{side, phase};
    }
  }
  return std::nullopt;
}

std::string text_of(const Channel& channel) {
  return std::string(name_of(channel.side)) + "." + std::string(name_of(channel.phase));
}

const char* text_of(storage::EventKind kind) {
  switch (kind) {
    case storage::EventKind::sag:
      return "sag";
    case storage::EventKind::swell:
      return "swell";
    case storage::EventKind::interruption:
      return "interruption";
    case storage::EventKind::out_of_band:
      break;
  }
  return "out_of_band";
}

const char* text_of(storage::EventEnd reason) {
  switch (reason) {
    case storage::EventEnd::recovered:
      return "recovered";
    case storage::EventEnd::gap:
      return "gap";
    case storage::EventEnd::stopped:
      return "stopped";
    case storage::EventEnd::cut_off:
      return "cut_off";
    case storage::EventEnd::open:
      break;
  }
  return "open";
}

const char* text_of(storage::Interval interval) {
  switch (interval) {
    case storage::Interval::three_seconds:
      return "three_seconds";
    case storage::Interval::ten_minutes:
      return "ten_minutes";
    case storage::Interval::two_hours:
      break;
  }
  return "two_hours";
}

std::string phases_of(const storage::Event& event) {
  std::string text;
  for (const Phase phase : {Phase::l1, Phase::l2, Phase::l3}) {
    if ((event.phases >> static_cast<unsigned>(phase)) & 1U)
      text += (text.empty() ? "" : "+") + std::string(name_of(phase));
  }
  return text;
}

struct RecordPrinter {
  void operator()(const storage::Aggregate& a) const {
    std::printf("aggregate,%s,%s,%lld,%lld,%.17g,%.17g,%.17g,%d,%lld,%d,%d,%d\n", text_of(a.interval),
                text_of(a.channel).c_str(), static_cast<long long>(a.begin.value),
                static_cast<long long>(a.end.value), a.u_rms_v, a.u_min_v, a.u_max_v, a.blocks,
                static_cast<long long>(a.measured_ns), a.flagged, a.partial, a.over_range);
  }
  void operator()(const storage::Frequency& f) const {
    std::printf("frequency,%lld,%lld,%.17g,%d,%d,%d\n", static_cast<long long>(f.begin.value),
                static_cast<long long>(f.end.value), f.hz, f.cycles, f.trusted, f.flagged);
  }
  void operator()(const storage::CoverageBegin& c) const {
    std::printf("coverage_begin,%lld,%lld,%s\n", static_cast<long long>(c.begin.value),
                static_cast<long long>(c.begin_sample.value), c.why.c_str());
  }
  void operator()(const storage::CoverageEnd& c) const {
    std::printf("coverage_end,%lld,%lld,%s\n", static_cast<long long>(c.end.value),
                static_cast<long long>(c.measured_ns), c.why.c_str());
  }
  template <class Other>
  void operator()(const Other& /*not asked for here*/) const {}
};

void print(const measure::MeterOutput& out, bool half_cycles) {
  if (half_cycles) {
    for (const measure::HalfCycle& h : out.half_cycles) {
      std::printf("half_cycle,%s,%.17g,%.17g,%.17g,%d,%d\n", text_of(h.channel).c_str(), h.value.begin,
                  h.value.end, h.value.u_rms_v, h.value.free_running, h.value.over_range);
    }
  }
  for (const measure::EventMark& mark : out.events) {
    if (!mark.ended) continue;
    const storage::Event& e = mark.event;
    std::printf("event,%s,%s,%.17g,%.17g,%lld,%.17g,%s,%s,%d\n", std::string(name_of(e.side)).c_str(),
                text_of(e.kind), mark.begin, mark.end, static_cast<long long>(e.duration_ns), e.extreme_v,
                phases_of(e).c_str(), text_of(e.end_reason), e.extreme_is_bound);
  }
  for (const storage::Record& record : out.records)
    std::visit(RecordPrinter{}, record);
}

/// Runs of samples at or beyond `range_v`.
void mark_over_range(double range_v, measure::Block& block) {
  for (std::size_t c = 0; c < block.channels(); ++c) {
    const auto volts = block.channel(c);
    for (std::size_t n = 0; n < volts.size(); ++n) {
      if (std::abs(static_cast<double>(volts[n])) < range_v) continue;
      const std::size_t first = n;
      while (n < volts.size() && std::abs(static_cast<double>(volts[n])) >= range_v)
        ++n;
      block.over_range.push_back({c, first, n - first});
    }
  }
}

/// How many frames the next block has: not across the begin of the lost stretch.
std::size_t next_cut(const Options& options, std::size_t at, std::size_t frames) {
  std::size_t to = options.block_frames == 0 ? frames : std::min(frames, at + options.block_frames);
  if (!options.lost.empty() && at < options.lost[0]) to = std::min(to, options.lost[0]);
  return to - at;
}

void measure_samples(const Options& options, const config::Site& site, const std::vector<float>& samples) {
  const std::size_t channels = site.channels.size();
  const std::size_t frames = samples.size() / channels;
  measure::Meter meter(site, {{options.begin_ns}, options.rate_hz, "file opened"});
  measure::MeterOutput out;
  measure::Block block;
  auto gap = measure::GapCause::none;
  for (std::size_t at = 0; at < frames;) {
    if (!options.lost.empty() && at == options.lost[0]) {
      at += options.lost[1];
      gap = measure::GapCause::samples_lost;
      if (at >= frames) break;
    }
    const std::size_t count = next_cut(options, at, frames);
    block.resize(channels, count);
    block.begin({static_cast<std::int64_t>(at)});
    block.gap = gap;
    gap = measure::GapCause::none;
    for (std::size_t c = 0; c < channels; ++c) {
      const auto volts = block.channel(c);
      for (std::size_t n = 0; n < count; ++n)
        volts[n] = samples[(at + n) * channels + c];
    }
    if (options.range_v > 0.0) mark_over_range(options.range_v, block);
    out.clear();
    meter.take(block, out);
    print(out, !options.no_half_cycles);
    at += count;
  }
  out.clear();
  meter.finish(storage::EventEnd::stopped, "end of file", out);
  print(out, !options.no_half_cycles);
}

std::optional<std::vector<float>> read_samples(const std::string& path) {
  std::ifstream file(path, std::ios::binary | std::ios::ate);
  if (!file) return std::nullopt;
  std::vector<float> samples(static_cast<std::size_t>(file.tellg()) / sizeof(float));
  file.seekg(0);
  file.read(reinterpret_cast<char*>(samples.data()),
            static_cast<std::streamsize>(samples.size() * sizeof(float)));
  if (!file) return std::nullopt;
  return samples;
}

}  // namespace

int main(int argc, char** argv) {
  Options options;
  CLI::App app(
      "Runs the measurement core over interleaved 32-bit floats (volts) and prints its records as CSV.");
  app.add_option("FILE", options.path)->required();
  app.add_option("--channels", options.channels, "such as input.L1,output.L1")->delimiter(',');
  app.add_option("--rate-hz", options.rate_hz)->check(CLI::PositiveNumber);
  app.add_option("--nominal-hz", options.nominal_hz)->check(CLI::IsMember({50.0, 60.0}));
  app.add_option("--nominal-v", options.nominal_v)->check(CLI::PositiveNumber);
  app.add_option("--begin-ns", options.begin_ns, "UTC of the first sample");
  app.add_option("--sag-pct", options.events.sag_pct);
  app.add_option("--swell-pct", options.events.swell_pct);
  app.add_option("--interruption-pct", options.events.interruption_pct);
  app.add_option("--hysteresis-pct", options.events.hysteresis_pct);
  app.add_option("--block-frames", options.block_frames, "frames a block; 0: all in one");
  app.add_option("--lost", options.lost, "first frame and number of frames that never arrive")->expected(2);
  app.add_option("--range-v", options.range_v, "samples at or beyond +-this are over-range");
  app.add_flag("--no-half-cycles", options.no_half_cycles, "leave the half-cycle values out");
  CLI11_PARSE(app, argc, argv);

  config::Site site;
  site.nominal_v = options.nominal_v;
  site.nominal_hz = options.nominal_hz;
  site.events = options.events;
  for (const std::string& name : options.channels) {
    const auto channel = channel_named(name);
    if (!channel) {
      std::fprintf(stderr,
                   "--channels: there is no channel %s; input or output, L1 to L3, such as input.L1\n",
                   name.c_str());
      return 2;
    }
    config::ChannelSettings settings;
    settings.channel = *channel;
    site.channels.push_back(settings);
  }
  site.phases = site.channels.size() > 2 ? 3 : 1;

  const auto samples = read_samples(options.path);
  if (!samples) {
    std::fprintf(stderr, "%s: cannot be read\n", options.path.c_str());
    return 2;
  }
  measure_samples(options, site, *samples);
  return 0;
}
