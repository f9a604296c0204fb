#pragma once

#include <string>

#include "config/result.hpp"

namespace tramline::storage {

/// Keeps a logbook to one writer at a time, across processes. A second writer would take what the first has
/// open for something left behind, and close it. Readers need no lock.
///
/// The lock is held on NAME.writing, which goes with it; one left by a power cut holds nobody up.
class WriterLock {
 public:
  /// An Error at once if another writer has it.
  [[nodiscard]] static Result<WriterLock> take(const std::string& path);
  WriterLock(WriterLock&& other) noexcept;
  WriterLock& operator=(WriterLock&&) = delete;
  ~WriterLock();

 private:
  WriterLock(std::string name, int file) : name_(std::move(name)), file_(file) {}
  std::string name_;
  int file_ = -1;
};

}  // namespace tramline::storage
