// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <condition_variable>
#include <cstdint>
#include <deque>
#include <map>
#include <memory>
#include <mutex>
#include <string>
#include <vector>

#include "plugin/daemon/job.hpp"

namespace halfturn::daemon {

/// Keeps the jobs of one drive in the order in which they came while fits finish in any order: a job leaves when it is ready
/// and no earlier one of its drive is still waiting. Drives do not wait for one another. Thread-safe.
class Order {
 public:
  /// Adds a job behind all others of its drive; `ready` where it needs no fit.
  void add(const std::shared_ptr<Job>& job, bool ready);

  /// The job has been fitted.
  void fitted(Job& job);

  /// Waits until at least one job may leave, and takes all that may, in order of arrival. Empty after `close`.
  std::vector<std::shared_ptr<Job>> wait();

  /// Lets `wait` return empty from now on, and returns what still stands in line; a worker may be at one of these jobs.
  std::vector<std::shared_ptr<Job>> close();

 private:
  std::vector<std::shared_ptr<Job>> take_ready();

  std::mutex mutex_;
  std::condition_variable changed_;
  std::map<std::string, std::deque<std::shared_ptr<Job>>> lanes_;  // by drive
  std::uint64_t last_number_ = 0;
  bool closed_ = false;
};

}  // namespace halfturn::daemon
