#pragma once

#include <cassert>
#include <string>
#include <utility>
#include <variant>

namespace tramline {

/// What went wrong, where, and what the reader can do about it. A value: it is returned, not thrown.
struct Error {
  std::string where;   ///< file, file:line:column, device or channel; may be empty
  std::string what;    ///< what happened, in plain words
  std::string remedy;  ///< what is allowed or what to do; may be empty

  /// "where: what; remedy", leaving out what is empty.
  [[nodiscard]] std::string text() const {
    std::string line = where.empty() ? what : where + ": " + what;
    if (!remedy.empty()) line += "; " + remedy;
    return line;
  }
};

/// Either a value or the Error that stood in its way. Ask `ok()` before taking either.
template <class T>
class [[nodiscard]] Result {
 public:
  Result(T value) : held_(std::in_place_index<0>, std::move(value)) {}
  Result(Error error) : held_(std::in_place_index<1>, std::move(error)) {}

  [[nodiscard]] bool ok() const noexcept { return held_.index() == 0; }
  explicit operator bool() const noexcept { return ok(); }

  [[nodiscard]] T& value() & {
    assert(ok());
    return *std::get_if<0>(&held_);
  }
  [[nodiscard]] const T& value() const& {
    assert(ok());
    return *std::get_if<0>(&held_);
  }
  [[nodiscard]] T&& value() && {
    assert(ok());
    return std::move(*std::get_if<0>(&held_));
  }
  [[nodiscard]] const Error& error() const {
    assert(!ok());
    return *std::get_if<1>(&held_);
  }

 private:
  std::variant<T, Error> held_;
};

struct Done {};
/// A step that yields nothing but may fail. Return `kDone` for success.
using Status = Result<Done>;
inline constexpr Done kDone{};

}  // namespace tramline
