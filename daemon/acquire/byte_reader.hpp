#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "config/result.hpp"

namespace tramline::acquire {

/// A file read from front to back by read(2), in large pieces. Closes itself. One thread.
class ByteReader {
 public:
  [[nodiscard]] static Result<ByteReader> open(const std::string& path);
  ByteReader(ByteReader&& other) noexcept;
  ByteReader& operator=(ByteReader&&) = delete;
  ~ByteReader();

  /// Fills `into` as far as the file goes; fewer bytes mean that it has ended.
  [[nodiscard]] Result<std::size_t> read(std::span<std::uint8_t> into);
  /// Skips `bytes`; beyond the end is no error, the next read gives nothing.
  [[nodiscard]] Status skip(std::int64_t bytes);

  [[nodiscard]] const std::string& path() const { return path_; }
  [[nodiscard]] std::int64_t position() const { return position_; }
  [[nodiscard]] std::int64_t size() const { return size_; }
  [[nodiscard]] double progress() const {
    return size_ > 0 ? static_cast<double>(position_) / static_cast<double>(size_) : 0.0;
  }

 private:
  ByteReader(int descriptor, std::string path, std::int64_t size)
      : descriptor_(descriptor), path_(std::move(path)), size_(size) {}
  int descriptor_;
  std::string path_;
  std::int64_t size_;
  std::int64_t position_ = 0;
};

/// Lines of a text file, ended by LF, CR LF or CR CR LF; blank lines are passed over, an end-of-file
/// character ends it.
class LineReader {
 public:
  static constexpr std::size_t kLongestLine = 65536;

  explicit LineReader(ByteReader bytes) : bytes_(std::move(bytes)), held_(262144) {}

  /// The next line that is not blank, valid until the next call; false at the end. A line longer than 64 KiB
  /// is an Error.
  [[nodiscard]] Result<bool> next(std::string_view& line);
  /// Raw bytes that follow the lines read so far.
  [[nodiscard]] Result<std::size_t> read(std::span<std::uint8_t> into);

  [[nodiscard]] std::int64_t line_number() const { return line_; }
  [[nodiscard]] std::string where() const { return bytes_.path() + ":" + std::to_string(line_); }
  /// Whether the last line given was ended as lines are, and not by the end of the file.
  [[nodiscard]] bool last_was_ended() const { return ended_; }
  [[nodiscard]] double progress() const { return bytes_.progress(); }
  [[nodiscard]] const std::string& path() const { return bytes_.path(); }

 private:
  [[nodiscard]] Result<bool> fill();
  [[nodiscard]] Error too_long() const;
  ByteReader bytes_;
  std::vector<std::uint8_t> held_;
  std::size_t begin_ = 0;
  std::size_t end_ = 0;
  std::int64_t line_ = 0;
  bool ended_ = true;
  bool over_ = false;
};

/// The fields of a line, without the spaces around them.
void split(std::string_view line, char separator, std::vector<std::string_view>& fields);
[[nodiscard]] std::string_view trimmed(std::string_view text);
/// A whole field as a number; `decimal_comma` accepts 1,5. false if it is none, or not finite.
[[nodiscard]] bool parse_number(std::string_view text, double& value, bool decimal_comma = false);
[[nodiscard]] bool parse_integer(std::string_view text, std::int64_t& value);
/// `text` for people: kept if it is UTF-8, else with '?' for each byte that is not ASCII.
[[nodiscard]] std::string displayable(std::string_view text);

}  // namespace tramline::acquire
