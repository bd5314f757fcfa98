// SPDX-License-Identifier: Apache-2.0
#pragma once

namespace halfturn::daemon {

/// Wakes a thread that polls `descriptor()`. May be rung by any thread, any number of times.
class Wake {
 public:
  Wake();
  ~Wake();
  Wake(const Wake&) = delete;
  Wake& operator=(const Wake&) = delete;

  void ring() const;
  void clear() const;
  int descriptor() const { return descriptor_; }

 private:
  int descriptor_ = -1;  // an eventfd
};

}  // namespace halfturn::daemon
