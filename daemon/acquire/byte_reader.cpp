#include "daemon/acquire/byte_reader.hpp"

#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <charconv>
#include <cmath>
#include <cstring>
#include <utility>

namespace tramline::acquire {

Result<ByteReader> ByteReader::open(const std::string& path) {
  const int descriptor = ::open(path.c_str(), O_RDONLY | O_CLOEXEC);
  if (descriptor < 0)
    return Error{path, std::string("cannot be opened: ") + std::strerror(errno),
                 "check the path and its permissions"};
  struct stat status {};
  if (::fstat(descriptor, &status) != 0 || S_ISDIR(status.st_mode)) {
    ::close(descriptor);
    return Error{path, "this is a folder", "name a recording in it"};
  }
  ::posix_fadvise(descriptor, 0, 0, POSIX_FADV_SEQUENTIAL);
  return ByteReader(descriptor, path, status.st_size);
}

ByteReader::ByteReader(ByteReader&& other) noexcept
    : descriptor_(std::exchange(other.descriptor_, -1)),
      path_(std::move(other.path_)),
      size_(other.size_),
      position_(other.position_) {}

ByteReader::~ByteReader() {
  if (descriptor_ >= 0) ::close(descriptor_);
}

Result<std::size_t> ByteReader::read(std::span<std::uint8_t> into) {
  std::size_t done = 0;
  while (done < into.size()) {
    const ssize_t got = ::read(descriptor_, into.data() + done, into.size() - done);
    if (got < 0 && errno == EINTR) continue;
    if (got < 0)
      return Error{path_ + ", byte " + std::to_string(position_),
                   std::string("cannot be read: ") + std::strerror(errno), "check the device it is on"};
    if (got == 0) break;
    done += static_cast<std::size_t>(got);
    position_ += got;
  }
  return done;
}

Status ByteReader::skip(std::int64_t bytes) {
  std::vector<std::uint8_t> into(static_cast<std::size_t>(std::clamp<std::int64_t>(bytes, 0, 65536)));
  while (bytes > 0) {
    const auto part =
        static_cast<std::size_t>(std::min<std::int64_t>(bytes, static_cast<std::int64_t>(into.size())));
    const auto got = read(std::span(into).first(part));
    if (!got) return got.error();
    if (got.value() == 0) break;
    bytes -= static_cast<std::int64_t>(got.value());
  }
  return kDone;
}

Result<bool> LineReader::fill() {
  if (begin_ > 0) {
    std::copy(held_.begin() + static_cast<std::ptrdiff_t>(begin_),
              held_.begin() + static_cast<std::ptrdiff_t>(end_), held_.begin());
    end_ -= begin_;
    begin_ = 0;
  }
  const auto got = bytes_.read(std::span(held_).subspan(end_));
  if (!got) return got.error();
  end_ += got.value();
  return got.value() > 0;
}

Error LineReader::too_long() const {
  return {bytes_.path() + ":" + std::to_string(line_ + 1), "a line of more than 64 KiB",
          "is this a text file?"};
}

Result<bool> LineReader::next(std::string_view& line) {
  constexpr char kEndOfFile = 0x1a;
  while (!over_) {
    const auto* from = held_.data() + begin_;
    const auto* found = static_cast<const std::uint8_t*>(std::memchr(from, '\n', end_ - begin_));
    if (found == nullptr) {
      if (end_ - begin_ > kLongestLine) return too_long();
      const auto more = fill();
      if (!more) return more.error();
      if (more.value()) continue;
      if (begin_ == end_) return false;
      over_ = true;
      ended_ = false;
      from = held_.data() + begin_;
      found = held_.data() + end_;
    }
    line = std::string_view(reinterpret_cast<const char*>(from), static_cast<std::size_t>(found - from));
    if (line.size() > kLongestLine) return too_long();
    begin_ = std::min(end_, static_cast<std::size_t>(found - held_.data()) + 1);
    ++line_;
    if (const std::size_t end = line.find(kEndOfFile); end != std::string_view::npos) {
      line = line.substr(0, end);
      over_ = ended_ = true;
    }
    while (!line.empty() && (line.back() == '\r' || line.back() == ' '))
      line.remove_suffix(1);
    if (!line.empty()) return true;
  }
  return false;
}

Result<std::size_t> LineReader::read(std::span<std::uint8_t> into) {
  const std::size_t from_held = std::min(into.size(), end_ - begin_);
  std::copy_n(held_.begin() + static_cast<std::ptrdiff_t>(begin_), from_held, into.begin());
  begin_ += from_held;
  const auto rest = bytes_.read(into.subspan(from_held));
  if (!rest) return rest.error();
  return from_held + rest.value();
}

std::string_view trimmed(std::string_view text) {
  const auto space = [](char c) { return c == ' ' || c == '\t' || c == '\r'; };
  while (!text.empty() && space(text.front()))
    text.remove_prefix(1);
  while (!text.empty() && space(text.back()))
    text.remove_suffix(1);
  return text;
}

void split(std::string_view line, char separator, std::vector<std::string_view>& fields) {
  fields.clear();
  for (;;) {
    const std::size_t at = line.find(separator);
    std::string_view field = trimmed(line.substr(0, at));
    if (field.size() >= 2 && field.front() == '"' && field.back() == '"')
      field = field.substr(1, field.size() - 2);
    fields.push_back(field);
    if (at == std::string_view::npos) return;
    line.remove_prefix(at + 1);
  }
}

bool parse_number(std::string_view text, double& value, bool decimal_comma) {
  if (!text.empty() && text.front() == '+') text.remove_prefix(1);
  std::string with_point;
  if (decimal_comma && text.find(',') != std::string_view::npos) {
    with_point.assign(text);
    std::replace(with_point.begin(), with_point.end(), ',', '.');
    text = with_point;
  }
  const auto [end, code] = std::from_chars(text.data(), text.data() + text.size(), value);
  return code == std::errc() && end == text.data() + text.size() && std::isfinite(value);
}

bool parse_integer(std::string_view text, std::int64_t& value) {
  const auto [end, code] = std::from_chars(text.data(), text.data() + text.size(), value);
  return code == std::errc() && end == text.data() + text.size();
}

std::string displayable(std::string_view text) {
  std::string out;
  for (std::size_t i = 0; i < text.size();) {
    const auto lead = static_cast<unsigned char>(text[i]);
    const std::size_t length = lead < 0x80                   ? 1
                               : lead >= 0xc2 && lead < 0xe0 ? 2
                               : lead >= 0xe0 && lead < 0xf0 ? 3
                               : lead >= 0xf0 && lead < 0xf5 ? 4
                                                             : 0;
    bool whole = length > 0 && i + length <= text.size() && lead >= 0x20;
    for (std::size_t k = 1; whole && k < length; ++k)
      whole = (static_cast<unsigned char>(text[i + k]) & 0xc0U) == 0x80;
    if (whole) {
      out.append(text.substr(i, length));
      i += length;
    } else {
      out += '?';
      ++i;
    }
  }
  return out;
}

}  // namespace tramline::acquire
