// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/ledger.hpp"

#include <exception>
#include <utility>

#include "plugin/wire/encode.hpp"

namespace halfturn::daemon {

namespace {

/// The answer to a job whose fit or decision broke; that is a defect of the program and not of the scan.
void hand_on_failure(const Route& route, const std::string& what, Outgoing& out) {
  const wire::Error error{
      route.id,
      {"internal", "", "the program failed on this request (" + what + "): keep the present settings, and ask again with the same id"},
      std::nullopt};
  if (route.answers)
    out.replies.push_back({route, wire::encode(wire::Reply(error), route.encoding)});
  else
    out.publications.push_back({"rejected/", error});
}

void hand_on(const Route& route, service::Settled settled, Outgoing& out) {
  bool published = false;
  for (auto& publication : settled.publications) {
    if (const auto* scan = std::get_if<wire::Fitted>(&publication.body)) {
      out.scans.push_back(*scan);
      published = true;
    }
    out.publications.push_back(std::move(publication));
  }
  if (!settled.reply || !route.answers) return;
  if (const auto* scan = std::get_if<wire::Fitted>(&*settled.reply); scan != nullptr && !published) out.scans.push_back(*scan);
  out.replies.push_back({route, wire::encode(*settled.reply, route.encoding)});
}

}  // namespace

Ledger::Ledger(service::Service& service, Order& order, Mailbox<Outgoing>& outbox)
    : service_(service), order_(order), outbox_(outbox), thread_([this] { keep(); }) {}

Ledger::~Ledger() {
  order_.close();
  thread_.join();
}

void Ledger::keep() {
  for (auto group = order_.wait(); !group.empty(); group = order_.wait()) outbox_.put(settle(group));
}

Outgoing Ledger::settle(const std::vector<std::shared_ptr<Job>>& group) {
  Outgoing out;
  out.jobs = group.size();
  std::vector<const Route*> routes;
  std::vector<service::Task> tasks;
  for (const auto& job : group) {
    if (!job->failure.empty()) {
      hand_on_failure(job->route, job->failure, out);
      continue;
    }
    routes.push_back(&job->route);
    tasks.push_back(std::move(job->task));
  }
  std::vector<service::Settled> settled;
  std::string failure;
  try {
    settled = service_.settle(tasks);
  } catch (const std::exception& error) {
    failure = error.what();
  }
  for (std::size_t i = 0; i < routes.size(); ++i) {
    if (i < settled.size())
      hand_on(*routes[i], std::move(settled[i]), out);
    else
      hand_on_failure(*routes[i], failure, out);
  }
  return out;
}

}  // namespace halfturn::daemon
