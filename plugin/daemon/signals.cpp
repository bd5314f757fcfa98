// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/signals.hpp"

#include <pthread.h>
#include <signal.h>
#include <sys/signalfd.h>
#include <unistd.h>

#include <cerrno>
#include <system_error>

namespace halfturn::daemon {

namespace {

sigset_t handled() {
  sigset_t set;
  sigemptyset(&set);
  sigaddset(&set, SIGTERM);
  sigaddset(&set, SIGINT);
  sigaddset(&set, SIGHUP);
  return set;
}

}  // namespace

Signals::Signals() {
  const sigset_t set = handled();
  pthread_sigmask(SIG_BLOCK, &set, nullptr);
  descriptor_ = ::signalfd(-1, &set, SFD_CLOEXEC | SFD_NONBLOCK);
  if (descriptor_ < 0) throw std::system_error(errno, std::generic_category(), "signalfd");
}

Signals::~Signals() {
  ::close(descriptor_);
  const sigset_t set = handled();
  pthread_sigmask(SIG_UNBLOCK, &set, nullptr);
}

std::optional<Signal> Signals::take() const {
  signalfd_siginfo info{};
  ssize_t size = 0;
  do size = ::read(descriptor_, &info, sizeof info);
  while (size < 0 && errno == EINTR);
  if (size != static_cast<ssize_t>(sizeof info)) return std::nullopt;
  if (info.ssi_signo == SIGHUP) return Signal::reload;
  return info.ssi_signo == SIGINT ? Signal::interrupt : Signal::stop;
}

}  // namespace halfturn::daemon
