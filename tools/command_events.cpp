#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <iostream>
#include <memory>
#include <nlohmann/json.hpp>

#include "config/time_text.hpp"
#include "tools/commands.hpp"
#include "tools/json_records.hpp"
#include "tools/logbook_view.hpp"
#include "tools/paragraph.hpp"
#include "tools/question.hpp"
#include "tools/words.hpp"

namespace tramline::tools {
namespace {

struct Filter {
  std::string side;
  std::string kind;
  std::string origin;
  std::string longer_than;
};

bool passes(const storage::Event& event, const Filter& filter, std::int64_t longer_than_ns) {
  if (!filter.side.empty() && name_of(event.side) != filter.side) return false;
  std::string kind(name_of(event.kind));
  std::replace(kind.begin(), kind.end(), ' ', '-');
  if (!filter.kind.empty() && kind != filter.kind) return false;
  if (!filter.origin.empty() && name_of(event.origin) != filter.origin) return false;
  return event.duration_ns > longer_than_ns || longer_than_ns == 0;
}

std::string remark_of(const storage::Event& event) {
  if (event.end_reason != storage::EventEnd::recovered) return std::string(name_of(event.end_reason));
  if (event.held_off) return *event.held_off ? "held off by the regulator" : "reached the load";
  if (event.origin != storage::Origin::not_judged) return "origin: " + std::string(name_of(event.origin));
  return "";
}

void print_table(const LogbookView& view, const std::vector<storage::EventRow>& events) {
  std::int64_t every_ns = 0;
  bool sampled = false;
  for (const storage::Session& session : view.sessions()) {
    every_ns = std::max(every_ns, session.begin.readings_every_ns);
    sampled = sampled || session.begin.readings_every_ns == 0;
  }
  if (every_ns > 0) std::cout << indented(readings_text(every_ns, !sampled), 0);
  if (events.empty()) {
    std::cout << "No such event in this period.\n";
    return;
  }
  std::cout << fmt::format("{:>6}  {:<34}{:<8}{:<14}{:<10}{:>14}  {:>12}  {}\n", "event", "begin", "side",
                           "kind", "phases", "lasting", "at worst", "");
  for (const storage::EventRow& row : events) {
    const storage::Event& event = row.event;
    std::cout << fmt::format(
        "{:>6}  {:<34}{:<8}{:<14}{:<10}{:>14}  {:>12}  {}\n", row.id, view.when(row), name_of(event.side),
        name_of(event.kind), phases_text(event.phases), config::format_duration(event.duration_ns),
        volts_text(event.extreme_v) + (event.extreme_is_bound ? "+" : ""), remark_of(event));
  }
  std::cout << "A duration runs from the first half-cycle value past the threshold to the first one back. "
               "See one: tramline wave "
               "LOGBOOK EVENT\n";
}

ExitStatus events(const Question& question, const Filter& filter) {
  std::int64_t longer_than_ns = 0;
  if (!filter.longer_than.empty()) {
    const auto duration = config::parse_duration(filter.longer_than);
    if (!duration) return tell(duration.error(), ExitStatus::wrong_usage);
    longer_than_ns = duration.value();
  }
  auto view = open_view(question.logbook, question.from, question.to);
  if (!view) return tell(view.error(), ExitStatus::wrong_usage);
  auto found = view.value().events();
  if (!found) return tell(found.error(), ExitStatus::could_not);
  std::erase_if(found.value(),
                [&](const storage::EventRow& row) { return !passes(row.event, filter, longer_than_ns); });
  if (!question.json) {
    print_table(view.value(), found.value());
    return ExitStatus::answered;
  }
  for (const storage::EventRow& row : found.value()) {
    nlohmann::ordered_json json;
    json["event"] = row.id;
    json.update(json_of(row.event));
    std::cout << json.dump() << '\n';
  }
  return ExitStatus::answered;
}

}  // namespace

void add_events(CLI::App& app, ExitStatus& status) {
  CLI::App* command =
      app.add_subcommand("events", "List sags, swells, interruptions and excursions from the band.");
  auto question = std::make_shared<Question>();
  auto filter = std::make_shared<Filter>();
  question->add_to(*command);
  command->add_option("--side", filter->side, "only this side")->check(CLI::IsMember({"input", "output"}));
  command->add_option("--kind", filter->kind, "only this kind")
      ->check(CLI::IsMember({"sag", "swell", "interruption", "out-of-band"}));
  command->add_option("--origin", filter->origin, "only of this origin")
      ->check(CLI::IsMember({"supply", "regulator", "undecided"}));
  command->add_option("--longer-than", filter->longer_than, "only what lasted longer: 1.5s, 200ms, 2m");
  command->callback([question, filter, &status] { status = events(*question, *filter); });
}

}  // namespace tramline::tools
