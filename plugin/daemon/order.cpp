// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/order.hpp"

#include <algorithm>

namespace halfturn::daemon {

void Order::add(const std::shared_ptr<Job>& job, bool ready) {
  {
    const std::lock_guard lock(mutex_);
    job->number = ++last_number_;
    job->ready = ready;
    lanes_[job->task.drive].push_back(job);
  }
  if (ready) changed_.notify_one();
}

void Order::fitted(Job& job) {
  {
    const std::lock_guard lock(mutex_);
    job.ready = true;
  }
  changed_.notify_one();
}

std::vector<std::shared_ptr<Job>> Order::wait() {
  std::unique_lock lock(mutex_);
  std::vector<std::shared_ptr<Job>> group;
  changed_.wait(lock, [&] { return !(group = take_ready()).empty() || closed_; });
  return group;
}

std::vector<std::shared_ptr<Job>> Order::close() {
  std::vector<std::shared_ptr<Job>> left;
  {
    const std::lock_guard lock(mutex_);
    closed_ = true;
    for (auto& [drive, jobs] : lanes_) left.insert(left.end(), jobs.begin(), jobs.end());
    lanes_.clear();
  }
  changed_.notify_all();
  return left;
}

std::vector<std::shared_ptr<Job>> Order::take_ready() {
  std::vector<std::shared_ptr<Job>> group;
  for (auto lane = lanes_.begin(); lane != lanes_.end();) {
    auto& jobs = lane->second;
    for (; !jobs.empty() && jobs.front()->ready; jobs.pop_front()) group.push_back(std::move(jobs.front()));
    lane = jobs.empty() ? lanes_.erase(lane) : std::next(lane);
  }
  std::sort(group.begin(), group.end(), [](const auto& a, const auto& b) { return a->number < b->number; });
  return group;
}

}  // namespace halfturn::daemon
