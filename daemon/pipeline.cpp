#include "daemon/pipeline.hpp"

#include <iterator>
#include <utility>

namespace tramline {

Pipeline::Pipeline(const config::Site& site, const acquire::StreamInfo& stream, std::string why)
    : meter_(site, {stream.begin, stream.rate_hz, std::move(why)}), watch_(site) {}

void Pipeline::take(const measure::Block& block, std::vector<storage::Record>& out) {
  metered_.clear();
  meter_.take(block, metered_);
  pass_on(out);
}

void Pipeline::finish(storage::EventEnd reason, const std::string& why, std::vector<storage::Record>& out) {
  metered_.clear();
  meter_.finish(reason, why, metered_);
  pass_on(out);
  watch_.finish(out);
}

void Pipeline::pass_on(std::vector<storage::Record>& out) {
  std::move(metered_.records.begin(), metered_.records.end(), std::back_inserter(out));
  watch_.take(metered_, out);
}

}  // namespace tramline
