// SPDX-License-Identifier: Apache-2.0
#include "plugin/log/writer_lock.hpp"

#include <fcntl.h>
#include <sys/file.h>
#include <unistd.h>

#include <array>
#include <cerrno>
#include <cstring>

namespace halfturn::log {
namespace {

std::string owner(int descriptor) {
  std::array<char, 32> text{};
  const auto size = pread(descriptor, text.data(), text.size(), 0);
  std::string digits;
  for (ssize_t i = 0; i < size && text[static_cast<std::size_t>(i)] >= '0' && text[static_cast<std::size_t>(i)] <= '9'; ++i) {
    digits += text[static_cast<std::size_t>(i)];
  }
  return digits.empty() ? "Another process" : "Process " + digits;
}

}  // namespace

Result<WriterLock> WriterLock::take(const std::string& log_path) {
  const std::string path = log_path + ".lock";
  const int descriptor = ::open(path.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0644);
  if (descriptor < 0) {
    return fault("log_unavailable", log_path, "The log " + log_path + " cannot be opened for writing, because its lock " +
                 path + " cannot be made (" + std::strerror(errno) + "). See that the folder exists and that this user may write in it.");
  }
  WriterLock lock(descriptor);
  if (flock(descriptor, LOCK_EX | LOCK_NB) != 0) {
    if (errno == EWOULDBLOCK) {
      return fault("log_unavailable", log_path, owner(descriptor) + " has the log " + log_path +
                   " open for writing already. Stop that daemon first, or give this one another `log`.");
    }
    return fault("log_unavailable", log_path, "The lock " + path + " cannot be taken (" + std::strerror(errno) +
                 "). Keep the log on a local disk: network file systems lock unreliably.");
  }
  // The number is for people and the message above; on a full disk the lock holds all the same.
  const std::string number = std::to_string(getpid()) + "\n";
  [[maybe_unused]] const bool named = ftruncate(descriptor, 0) == 0 && pwrite(descriptor, number.data(), number.size(), 0) > 0;
  return lock;
}

WriterLock::~WriterLock() {
  if (descriptor_ >= 0) ::close(descriptor_);
}

}  // namespace halfturn::log
