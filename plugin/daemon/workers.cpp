// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/workers.hpp"

#include <exception>
#include <utility>

namespace halfturn::daemon {

Workers::Workers(unsigned threads, Fit fit, Done done) : fit_(std::move(fit)), done_(std::move(done)) {
  for (unsigned i = 0; i < threads; ++i) threads_.emplace_back([this] { work(); });
}

Workers::~Workers() {
  {
    const std::lock_guard lock(mutex_);
    closed_ = true;
  }
  added_.notify_all();
  for (auto& thread : threads_) thread.join();
}

void Workers::add(std::shared_ptr<Job> job) {
  {
    const std::lock_guard lock(mutex_);
    waiting_.push_back(std::move(job));
  }
  added_.notify_one();
}

void Workers::work() {
  while (const auto job = next()) {
    try {
      fit_(job->task);
    } catch (const std::exception& error) {
      job->failure = error.what();
    }
    done_(*job);
  }
}

std::shared_ptr<Job> Workers::next() {
  std::unique_lock lock(mutex_);
  added_.wait(lock, [this] { return closed_ || !waiting_.empty(); });
  if (closed_) return nullptr;
  auto job = std::move(waiting_.front());
  waiting_.pop_front();
  return job;
}

}  // namespace halfturn::daemon
