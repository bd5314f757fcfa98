// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <mutex>
#include <utility>
#include <vector>

#include "plugin/daemon/wake.hpp"

namespace halfturn::daemon {

/// A queue from any threads to the one that polls `descriptor()`, which is readable while something waits.
template <class T>
class Mailbox {
 public:
  void put(T item) {
    {
      const std::lock_guard lock(mutex_);
      items_.push_back(std::move(item));
    }
    wake_.ring();
  }

  /// Everything that waits, in order of arrival.
  std::vector<T> take_all() {
    wake_.clear();
    const std::lock_guard lock(mutex_);
    return std::exchange(items_, {});
  }

  int descriptor() const { return wake_.descriptor(); }

 private:
  std::mutex mutex_;
  std::vector<T> items_;
  Wake wake_;
};

}  // namespace halfturn::daemon
