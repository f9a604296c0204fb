#include "tools/interview.hpp"

#include <spdlog/fmt/fmt.h>

#include <charconv>
#include <istream>
#include <ostream>
#include <string_view>

namespace tramline::tools {
namespace {

std::string_view trimmed(std::string_view text) {
  while (!text.empty() && (text.front() == ' ' || text.front() == '\t'))
    text.remove_prefix(1);
  while (!text.empty() && (text.back() == ' ' || text.back() == '\t' || text.back() == '\r'))
    text.remove_suffix(1);
  return text;
}

std::optional<double> number_in(std::string_view text) {
  text = trimmed(text);
  double number = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), number);
  if (error != std::errc() || end != text.data() + text.size()) return std::nullopt;
  return number;
}

}  // namespace

void Interview::say(const std::string& text) {
  out_ << text;
}

std::string Interview::line(const std::string& prompt) {
  out_ << prompt << std::flush;
  std::string line;
  if (!std::getline(in_, line)) {
    ended_ = true;
    return {};
  }
  return std::string(trimmed(line));
}

std::string Interview::text(const std::string& question, const std::string& offered,
                            const std::function<std::string(const std::string&)>& fault) {
  for (;;) {
    std::string answer =
        line(offered.empty() ? question + ": " : fmt::format("{} [{}]: ", question, offered));
    if (answer.empty()) answer = offered;
    if (ended_) return answer;
    const std::string wrong = answer.empty() ? "An answer is needed." : fault ? fault(answer) : std::string();
    if (wrong.empty()) return answer;
    say("  " + wrong + "\n");
  }
}

double Interview::number(const std::string& question, double offered, double low, double high) {
  for (;;) {
    const std::string answer =
        line(offered > 0.0 ? fmt::format("{} [{:g}]: ", question, offered) : question + ": ");
    if (ended_ || (answer.empty() && offered > 0.0)) return offered;
    const auto number = number_in(answer);
    if (number && *number >= low && *number <= high) return *number;
    say(fmt::format("  A number from {:g} to {:g} is needed.\n", low, high));
  }
}

std::optional<double> Interview::number_or_none(const std::string& question, double low, double high) {
  for (;;) {
    const std::string answer = line(question + " [not known]: ");
    if (answer.empty()) return std::nullopt;
    const auto number = number_in(answer);
    if (number && *number >= low && *number <= high) return number;
    say(fmt::format("  A number from {:g} to {:g} is needed, or an empty line.\n", low, high));
  }
}

std::pair<double, double> Interview::range(const std::string& question) {
  for (;;) {
    const std::string answer = line(question + ": ");
    if (ended_) return {0.0, 0.0};
    const std::size_t space = answer.find_first_of(" -,");
    const auto low = number_in(std::string_view(answer).substr(0, space));
    const auto high =
        space == std::string::npos ? std::nullopt : number_in(std::string_view(answer).substr(space + 1));
    if (low && high && *low > 0.0 && *low < *high) return {*low, *high};
    say("  Two numbers are needed, the lower first, such as: 170 270\n");
  }
}

bool Interview::yes(const std::string& question, bool offered) {
  for (;;) {
    const std::string answer = line(fmt::format("{} [{}]: ", question, offered ? "Y/n" : "y/N"));
    if (answer.empty()) return offered;
    if (answer == "y" || answer == "Y" || answer == "yes") return true;
    if (answer == "n" || answer == "N" || answer == "no") return false;
    say("  y or n is needed.\n");
  }
}

std::size_t Interview::choice(const std::string& question, const std::vector<std::string>& choices,
                              std::size_t offered) {
  for (std::size_t i = 0; i < choices.size(); ++i)
    say(fmt::format("  {:2}  {}\n", i + 1, choices[i]));
  const double number =
      this->number(question, static_cast<double>(offered + 1), 1.0, static_cast<double>(choices.size()));
  return static_cast<std::size_t>(number) - 1;
}

}  // namespace tramline::tools
