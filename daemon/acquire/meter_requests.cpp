#include "daemon/acquire/meter_requests.hpp"

#include <algorithm>
#include <numeric>
#include <tuple>

namespace tramline::acquire {

std::vector<MeterRequest> requests_for(const std::vector<config::MeterRegister>& wanted, int most_words) {
  std::vector<std::size_t> order(wanted.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) {
    return std::tie(wanted[a].table, wanted[a].address) < std::tie(wanted[b].table, wanted[b].address);
  });
  std::vector<MeterRequest> requests;
  for (const std::size_t one : order) {
    const config::MeterRegister& found = wanted[one];
    const int end = found.address + found.words();
    if (!requests.empty()) {
      MeterRequest& last = requests.back();
      const int words = std::max(last.words, end - last.address);
      if (last.table == found.table && found.address <= last.address + last.words && words <= most_words) {
        last.words = words;
        last.registers.push_back(one);
        continue;
      }
    }
    requests.push_back({found.table, found.address, found.words(), {one}});
  }
  return requests;
}

}  // namespace tramline::acquire
