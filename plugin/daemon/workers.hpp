// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <condition_variable>
#include <deque>
#include <functional>
#include <memory>
#include <mutex>
#include <thread>
#include <vector>

#include "plugin/daemon/job.hpp"

namespace halfturn::daemon {

/// Threads that fit jobs, first come, first served.
class Workers {
 public:
  using Fit = std::function<void(service::Task&)>;
  using Done = std::function<void(Job&)>;  // called by the worker's thread

  /// `threads` at least 1. What `fit` throws becomes the job's `failure`.
  Workers(unsigned threads, Fit fit, Done done);

  /// Waits for the fits that have begun; those that have not are dropped.
  ~Workers();

  void add(std::shared_ptr<Job> job);

 private:
  void work();
  std::shared_ptr<Job> next();

  Fit fit_;
  Done done_;
  std::mutex mutex_;
  std::condition_variable added_;
  std::deque<std::shared_ptr<Job>> waiting_;
  bool closed_ = false;
  std::vector<std::thread> threads_;
};

}  // namespace halfturn::daemon
