// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <chrono>
#include <condition_variable>
#include <memory>
#include <mutex>
#include <string>
#include <thread>
#include <vector>

#include "plugin/daemon/mailbox.hpp"
#include "plugin/daemon/order.hpp"
#include "plugin/service/service.hpp"

namespace halfturn::daemon {

/// An encoded reply and where it goes.
struct Parcel {
  Route route;
  std::string message;
};

/// The outcome of a job that repeats of its request may have joined.
struct Landing {
  std::string key;
  wire::Reply reply;
};

/// What one settled group hands to the thread that owns the sockets.
struct Outgoing {
  std::vector<Parcel> replies;
  std::vector<Landing> landings;
  std::vector<service::Publication> publications;
  std::vector<wire::Fitted> scans;  // one a scan that was decided, for the program's own log lines
  std::size_t jobs = 0;             // how many are no longer in flight
};

/// The thread that decides and commits. It alone uses the log's connection while it runs. A reply is handed on only after
/// the commit that holds it.
class Ledger {
 public:
  Ledger(service::Service& service, Order& order, Mailbox<Outgoing>& outbox);

  /// Finishes the group at hand, then ends; what still stands in the Order stays there.
  ~Ledger();

  /// Waits until it has ended after the Order was closed, at most so long; false where it is still at work.
  bool ended_within(std::chrono::milliseconds time);

 private:
  void keep();
  void work();
  Outgoing settle(const std::vector<std::shared_ptr<Job>>& group);

  service::Service& service_;
  Order& order_;
  Mailbox<Outgoing>& outbox_;
  std::mutex mutex_;
  std::condition_variable changed_;
  bool ended_ = false;  // guarded by mutex_
  std::thread thread_;
};

}  // namespace halfturn::daemon
