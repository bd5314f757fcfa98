// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>

namespace halfturn::daemon {

enum class Signal { stop, interrupt, reload };

/// SIGTERM, SIGINT and SIGHUP as something to poll. They are blocked in the thread that makes this and in those it starts
/// afterwards, so make it before any other thread; they are unblocked when it ends.
class Signals {
 public:
  Signals();
  ~Signals();
  Signals(const Signals&) = delete;
  Signals& operator=(const Signals&) = delete;

  int descriptor() const { return descriptor_; }

  /// The next signal that came, if any; never waits.
  std::optional<Signal> take() const;

 private:
  int descriptor_ = -1;  // a signalfd
};

}  // namespace halfturn::daemon
