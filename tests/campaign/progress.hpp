// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <atomic>
#include <chrono>
#include <cstdint>
#include <mutex>
#include <string>

/// How far a campaign is, said on standard error.
namespace halfturn::campaign {

/// `seconds` as `40 s`, `12 min` or `1 h 05 min`.
std::string in_words(double seconds);

class Progress {
 public:
  /// Of `whole` scans, which are `what`.
  Progress(std::int64_t whole, std::string what);

  /// Called by any thread; says every percent on a terminal, every tenth elsewhere, with an estimate of the time left. Silent for
  /// the first two seconds.
  void one_more();
  double seconds() const;

 private:
  std::int64_t whole_;
  std::string what_;
  bool terminal_;
  std::chrono::steady_clock::time_point begun_ = std::chrono::steady_clock::now();
  std::atomic<std::int64_t> done_ = 0;
  std::mutex saying_;
};

}  // namespace halfturn::campaign
