// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <string>
#include <vector>

#include "plugin/service/service.hpp"

namespace halfturn::daemon {

/// Where a reply goes: the frames that stood before the message, the peer's identity first.
struct Route {
  bool answers = true;  // false: came by the feed, what is wrong with it is published
  std::string id;       // of the request
  std::vector<std::string> envelope;
  wire::Encoding encoding = wire::Encoding::msgpack;
};

/// A task on its way through the threads. The worker that fits it is the only one to touch `task` and `failure` until it has
/// handed the job back to the Order.
struct Job {
  service::Task task;
  Route route;
  std::string key;           // under which a repeat of the request joins this job; empty: none may
  std::string failure;       // what broke in the fit, other than a bad scan
  std::uint64_t number = 0;  // order of arrival; given by the Order
  bool ready = false;        // guarded by the Order
};

}  // namespace halfturn::daemon
