// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/ledger.hpp"

#include <exception>
#include <utility>

#include "plugin/wire/encode.hpp"

namespace halfturn::daemon {

namespace {

/// Where a job's outcome goes.
struct Address {
  Route route;
  std::string key;
};

/// The reply to who asked, and to those who may have asked again meanwhile.
void hand_on(const Address& to, wire::Reply reply, Outgoing& out) {
  if (to.route.answers) out.replies.push_back({to.route, wire::encode(reply, to.route.encoding)});
  if (!to.key.empty()) out.landings.push_back({to.key, std::move(reply)});
}

/// The answer to a job whose fit or decision broke; that is a defect of the program and not of the scan.
void hand_on_failure(const Address& to, const std::string& what, Outgoing& out) {
  const wire::Error error{
      to.route.id,
      {"internal", "", "the program failed on this request (" + what + "): keep the present settings, and ask again with the same id"},
      std::nullopt};
  if (!to.route.answers) out.publications.push_back({"rejected/", error});
  hand_on(to, error, out);
}

void hand_on(const Address& to, service::Settled settled, Outgoing& out) {
  bool published = false;
  for (auto& publication : settled.publications) {
    if (const auto* scan = std::get_if<wire::Fitted>(&publication.body)) {
      out.scans.push_back(*scan);
      published = true;
    }
    out.publications.push_back(std::move(publication));
  }
  if (!settled.reply) return;
  if (const auto* scan = std::get_if<wire::Fitted>(&*settled.reply); scan != nullptr && !published) out.scans.push_back(*scan);
  hand_on(to, std::move(*settled.reply), out);
}

}  // namespace

Ledger::Ledger(service::Service& service, Order& order, Mailbox<Outgoing>& outbox)
    : service_(service), order_(order), outbox_(outbox), thread_([this] { work(); }) {}

Ledger::~Ledger() {
  order_.close();
  thread_.join();
}

bool Ledger::ended_within(std::chrono::milliseconds time) {
  std::unique_lock lock(mutex_);
  return changed_.wait_for(lock, time, [this] { return ended_; });
}

void Ledger::work() {
  keep();
  const std::lock_guard lock(mutex_);
  ended_ = true;
  changed_.notify_all();
}

void Ledger::keep() {
  for (auto group = order_.wait(); !group.empty(); group = order_.wait()) outbox_.put(settle(group));
}

Outgoing Ledger::settle(const std::vector<std::shared_ptr<Job>>& group) {
  Outgoing out;
  out.jobs = group.size();
  std::vector<Address> addresses;
  std::vector<service::Task> tasks;
  for (const auto& job : group) {
    Address address{job->route, job->key};
    if (!job->failure.empty()) {
      hand_on_failure(address, job->failure, out);
      continue;
    }
    addresses.push_back(std::move(address));
    tasks.push_back(std::move(job->task));
  }
  std::vector<service::Settled> settled;
  std::string failure;
  try {
    settled = service_.settle(tasks);
  } catch (const std::exception& error) {
    failure = error.what();
  }
  for (std::size_t i = 0; i < addresses.size(); ++i) {
    if (i < settled.size())
      hand_on(addresses[i], std::move(settled[i]), out);
    else
      hand_on_failure(addresses[i], failure, out);
  }
  return out;
}

}  // namespace halfturn::daemon
