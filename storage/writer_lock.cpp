#include "storage/writer_lock.hpp"

#include <fcntl.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <system_error>
#include <utility>

namespace tramline::storage {

Result<WriterLock> WriterLock::take(const std::string& path) {
  const std::string name = path + ".writing";
  for (;;) {
    const int file = ::open(name.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0644);
    if (file < 0) {
      return Error{path,
                   "it cannot be opened for writing: no file can be made beside it: " +
                       std::generic_category().message(errno),
                   "check that the folder exists, may be written and has room"};
    }
    WriterLock lock(name, file);
    if (::flock(file, LOCK_EX | LOCK_NB) != 0) {
      ::close(std::exchange(lock.file_, -1));
      return Error{path, "another program is writing this logbook",
                   "stop it (tramlined?), or name another logbook"};
    }
    // Whoever had it before may have removed the name between our open and our lock.
    struct stat held = {};
    struct stat named = {};
    if (::fstat(file, &held) == 0 && ::stat(name.c_str(), &named) == 0 && held.st_ino == named.st_ino &&
        held.st_dev == named.st_dev)
      return lock;
    ::close(std::exchange(lock.file_, -1));
  }
}

WriterLock::WriterLock(WriterLock&& other) noexcept
    : name_(std::move(other.name_)), file_(std::exchange(other.file_, -1)) {}

WriterLock::~WriterLock() {
  if (file_ < 0) return;
  ::unlink(name_.c_str());
  ::close(file_);
}

}  // namespace tramline::storage
