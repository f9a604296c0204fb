#pragma once

#include <functional>
#include <iosfwd>
#include <optional>
#include <string>
#include <utility>
#include <vector>

namespace tramline::tools {

/// Questions to a person at a terminal, a line each. An empty line takes what is offered; what cannot be
/// understood is asked again. After the end of the input every question gives what is offered, and
/// `ended()` is true.
class Interview {
 public:
  Interview(std::istream& in, std::ostream& out) : in_(in), out_(out) {}

  [[nodiscard]] bool ended() const { return ended_; }
  void say(const std::string& text);

  /// `fault` says what is wrong with an answer, or nothing.
  std::string text(const std::string& question, const std::string& offered,
                   const std::function<std::string(const std::string&)>& fault = {});
  /// `offered` 0: there is none.
  double number(const std::string& question, double offered, double low, double high);
  /// Nothing for an empty line.
  std::optional<double> number_or_none(const std::string& question, double low, double high);
  /// "170 270".
  std::pair<double, double> range(const std::string& question);
  bool yes(const std::string& question, bool offered);
  /// The number of a choice, from 0.
  std::size_t choice(const std::string& question, const std::vector<std::string>& choices,
                     std::size_t offered);

 private:
  std::string line(const std::string& prompt);

  std::istream& in_;
  std::ostream& out_;
  bool ended_ = false;
};

}  // namespace tramline::tools
