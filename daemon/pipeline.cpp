#include "daemon/pipeline.hpp"

#include <iterator>
#include <utility>

namespace tramline {

namespace {

using Meter = std::variant<measure::Meter, measure::PolledMeter>;

Meter meter_for(const config::Site& site, const acquire::StreamInfo& stream, std::string why) {
  measure::StreamShape shape{stream.begin, stream.rate_hz, std::move(why)};
  if (stream.readings_every_s > 0.0) return measure::PolledMeter(site, shape, stream.readings_every_s);
  return measure::Meter(site, shape);
}

}  // namespace

Pipeline::Pipeline(const config::Site& site, const acquire::StreamInfo& stream, std::string why)
    : meter_(meter_for(site, stream, std::move(why))), watch_(site, stream.readings_every_s == 0.0) {}

void Pipeline::clock_state(const storage::ClockState& state) {
  std::visit([&](auto& meter) { meter.clock_state(state); }, meter_);
  watch_.clock_state(state);
}

void Pipeline::take(const measure::Block& block, std::vector<storage::Record>& out) {
  metered_.clear();
  std::visit([&](auto& meter) { meter.take(block, metered_); }, meter_);
  pass_on(out);
}

void Pipeline::finish(storage::EventEnd reason, const std::string& why, std::vector<storage::Record>& out) {
  metered_.clear();
  std::visit([&](auto& meter) { meter.finish(reason, why, metered_); }, meter_);
  pass_on(out);
  watch_.finish(out);
}

void Pipeline::pass_on(std::vector<storage::Record>& out) {
  std::move(metered_.records.begin(), metered_.records.end(), std::back_inserter(out));
  watch_.take(metered_, out);
}

}  // namespace tramline
