// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "model/quantity/result.hpp"

namespace halfturn::log {

/// The right to write a log: an advisory lock on the file `PATH.lock`, which holds the owner's process number. The kernel
/// releases it when the process ends, however it ends; the file itself stays. Readers need none.
class WriterLock {
 public:
  /// Fault where another process (or this one) has it, naming the process.
  static Result<WriterLock> take(const std::string& log_path);
  ~WriterLock();
  WriterLock(WriterLock&& other) noexcept : descriptor_(other.descriptor_) { other.descriptor_ = -1; }
  WriterLock& operator=(WriterLock&&) = delete;

 private:
  explicit WriterLock(int descriptor) : descriptor_(descriptor) {}
  int descriptor_;
};

}  // namespace halfturn::log
