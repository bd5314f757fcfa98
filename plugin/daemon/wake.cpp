// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/wake.hpp"

#include <sys/eventfd.h>
#include <unistd.h>

#include <cerrno>
#include <cstdint>
#include <system_error>

namespace halfturn::daemon {

Wake::Wake() : descriptor_(::eventfd(0, EFD_CLOEXEC | EFD_NONBLOCK)) {
  if (descriptor_ < 0) throw std::system_error(errno, std::generic_category(), "eventfd");
}

Wake::~Wake() { ::close(descriptor_); }

void Wake::ring() const {
  const std::uint64_t one = 1;
  while (::write(descriptor_, &one, sizeof one) < 0 && errno == EINTR) {
  }
}

void Wake::clear() const {
  std::uint64_t count = 0;
  while (::read(descriptor_, &count, sizeof count) < 0 && errno == EINTR) {
  }
}

}  // namespace halfturn::daemon
