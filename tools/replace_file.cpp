#include "tools/replace_file.hpp"

#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <filesystem>
#include <string_view>
#include <system_error>
#include <utility>

namespace tramline::tools {
namespace {

namespace fs = std::filesystem;

class Descriptor {
 public:
  explicit Descriptor(int number) : number_(number) {}
  Descriptor(const Descriptor&) = delete;
  Descriptor& operator=(const Descriptor&) = delete;
  ~Descriptor() {
    if (number_ >= 0) ::close(number_);
  }
  [[nodiscard]] int number() const { return number_; }
  [[nodiscard]] bool close() { return ::close(std::exchange(number_, -1)) == 0; }

 private:
  int number_;
};

bool write_all(int file, std::string_view text) {
  while (!text.empty()) {
    const ssize_t written = ::write(file, text.data(), text.size());
    if (written < 0 && errno == EINTR) continue;
    if (written <= 0) return false;
    text.remove_prefix(static_cast<std::size_t>(written));
  }
  return true;
}

}  // namespace

Status replace_file(const std::string& path, const std::string& text) {
  std::error_code code;
  const bool is_link = fs::is_symlink(fs::symlink_status(path, code));
  const fs::path target = is_link ? fs::weakly_canonical(path, code) : fs::path(path);
  const std::string fresh = target.string() + ".new";
  const auto failed = [&](const char* what) {
    const std::string why = std::generic_category().message(errno);
    if (errno != EACCES && errno != EROFS) ::unlink(fresh.c_str());
    return Error{path, std::string(what) + ": " + why,
                 "the file is as it was; check the folder's permissions and room"};
  };
  struct stat old {};
  const bool there = ::stat(target.c_str(), &old) == 0;
  const mode_t mode = there ? old.st_mode & 0777U : 0644U;
  Descriptor file(::open(fresh.c_str(), O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC | O_NOFOLLOW, mode));
  if (file.number() < 0) return failed("cannot be written");
  if (there) (void)::fchmod(file.number(), mode);
  if (!write_all(file.number(), text) || ::fsync(file.number()) != 0 || !file.close())
    return failed("cannot be written");
  if (::rename(fresh.c_str(), target.c_str()) != 0) return failed("cannot be replaced");
  const fs::path folder = target.has_parent_path() ? target.parent_path() : fs::path(".");
  const Descriptor of_folder(::open(folder.c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC));
  if (of_folder.number() >= 0) (void)::fsync(of_folder.number());
  return kDone;
}

}  // namespace tramline::tools
