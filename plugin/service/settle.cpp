// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <iterator>

#include "model/quantity/constants.hpp"
#include "plugin/service/answer.hpp"
#include "plugin/service/known.hpp"
#include "plugin/service/service.hpp"
#include "plugin/wire/encode.hpp"
#include "plugin/wire/time.hpp"

/// Stage three: decisions, and the transaction that commits them.
namespace halfturn::service {
namespace {

constexpr std::int64_t kHistoryRows = 1000;

wire::Error error_of(std::string id, Fault fault) { return {std::move(id), std::move(fault), std::nullopt}; }

log::Event noted_event(const Task& task) {
  const auto& request = task.request;
  log::Event event;
  event.drive = request.drive;
  event.kind = request.kind == wire::Kind::applied ? "applied" : request.kind == wire::Kind::hold ? "hold" : "release";
  event.happened_at = request.applied_at.value_or(task.received_at);
  event.received_at = task.received_at;
  event.id = request.id;
  event.pulses_s = request.pulses_s;
  if (request.carrier_hz) event.carrier_hz = *request.carrier_hz;
  event.by = request.by;
  event.why = request.why;
  return event;
}

recalibrate::Decision decide_task(const Task& task, const recalibrate::State& state) {
  const auto* drive = task.configured();
  return recalibrate::decide(state, *task.fit, task.prior, context_for(drive, task.scan(), task.prior, task.taken_at));
}

wire::Drift drift_of(const std::string& drive, const recalibrate::State& state, Time at) {
  wire::Drift drift;
  drift.drive = drive;
  const auto known = state.rabi.predict(at);
  if (!known) return drift;
  auto& rabi = drift.rabi_hz;
  rabi.value = std::exp(known->mean) / constants::kTwoPi;
  rabi.sigma = rabi.value * known->sigma;
  rabi.low = rabi.value * std::exp(-1.96 * known->sigma);
  rabi.high = rabi.value * std::exp(1.96 * known->sigma);
  return drift;
}

}  // namespace

/// States as they will be when the group is committed.
struct Service::Group {
  std::map<std::string, recalibrate::State> states;
  recalibrate::State& of(const Service& service, const std::string& drive) {
    const auto found = states.find(drive);
    return found != states.end() ? found->second : states.emplace(drive, service.known_of(drive)).first->second;
  }
};

std::vector<Settled> Service::settle(std::span<Task> tasks) {
  Group group;
  std::vector<Settled> settled;
  settled.reserve(tasks.size());
  auto written = log_.begin();
  for (Task& task : tasks) {
    if (!written) break;
    auto one = settle_one(task, group);
    if (one) settled.push_back(std::move(*one));
    else written = tl::unexpected(one.error());
  }
  if (written) written = log_.commit();
  else log_.roll_back();

  const std::lock_guard lock(mutex_);
  log_trouble_ = written ? "" : written.error().message;
  if (written) {
    for (auto& [drive, state] : group.states) states_[drive] = std::move(state);
    return settled;
  }
  settled.clear();
  for (const Task& task : tasks) {
    Settled failed;
    if (task.answers) failed.reply = error_of(task.request.id, {"log_unavailable", "", written.error().message});
    else failed.publications.push_back({"rejected/", error_of(task.request.id, {"log_unavailable", "", written.error().message})});
    settled.push_back(std::move(failed));
  }
  return settled;
}

Result<Settled> Service::settle_one(Task& task, Group& group) {
  const auto& request = task.request;
  if (request.kind == wire::Kind::history) return settle_history(task);
  if (request.options.store) {
    auto before = log_.find_reply(request.id);
    if (!before) return tl::unexpected(before.error());
    if (*before) {
      Settled again;
      if ((*before)->digest == request.digest) again.reply = wire::Stored{request.id, (*before)->reply};
      else again.reply = error_of(request.id, {"id_reused", "id", "this id came before with other content; give every request an id of its own, such as a UUID"});
      if (task.answers) return again;
      if (const auto* error = std::get_if<wire::Error>(&*again.reply)) again.publications.push_back({"rejected/", *error});
      again.reply.reset();
      return again;
    }
  }
  return task.needs_fit() ? settle_fit(task, group) : settle_note(task, group);
}

Result<Settled> Service::settle_fit(Task& task, Group& group) {
  const bool store = task.request.options.store;
  static const recalibrate::State kNothing;
  const recalibrate::State before = store ? group.of(*this, task.drive) : kNothing;
  const auto decision = decide_task(task, before);
  const Answer answer{task.scan(), task.request.options, task.configured(), task.prior, *task.fit, decision, task.assumed, task.taken_at};
  wire::Fitted fitted = fitted_from(answer);
  fitted.id = task.request.id;
  fitted.stored = store;

  Settled settled;
  if (store) {
    log::Event event = event_from(answer, fitted);
    event.received_at = task.received_at;
    event.id = task.request.id;
    const std::string reply = wire::encode_stored(fitted);
    const log::Bulk bulk{wire::encode_scan(task.scan()), task.request.digest, task.configuration->fingerprint, reply, task.scan().ambient};
    if (auto number = log_.append(event, &bulk); !number) return tl::unexpected(number.error());
    if (auto kept = log_.keep_reply(task.request.id, {task.request.digest, reply}, task.received_at); !kept) return tl::unexpected(kept.error());
    auto& state = group.of(*this, task.drive);
    fold(state, event);
    settled.publications.push_back({"fitted/" + task.drive + "/", fitted});
    if (decision.event.effect != recalibrate::Effect::none)
      settled.publications.push_back({"drift/" + task.drive + "/", drift_of(task.drive, state, task.taken_at)});
  }
  if (task.answers) settled.reply = std::move(fitted);
  return settled;
}

Result<Settled> Service::settle_note(Task& task, Group& group) {
  const log::Event event = noted_event(task);
  Settled settled;
  wire::Noted noted;
  noted.id = task.request.id;
  if (auto number = log_.append(event, nullptr); !number) return tl::unexpected(number.error());
  const log::StoredReply reply{task.request.digest, wire::encode(noted, wire::Encoding::msgpack)};
  if (auto kept = log_.keep_reply(task.request.id, reply, task.received_at); !kept) return tl::unexpected(kept.error());
  fold(group.of(*this, task.drive), event);
  if (task.answers) settled.reply = std::move(noted);
  return settled;
}

/// A page ends with all rows of its last time, beyond the limit where need be: the next one then begins strictly later.
Result<Settled> Service::settle_history(const Task& task) {
  const auto& request = task.request;
  const std::int64_t limit = request.limit.value_or(kHistoryRows);
  auto rows = log_.history({request.drive, request.since, request.until, limit, 0});
  if (!rows) return tl::unexpected(rows.error());
  wire::Rows answer;
  answer.id = request.id;
  if (static_cast<std::int64_t>(rows->size()) == limit) {
    const auto last = rows->back().event;
    auto ties = log_.history({request.drive, last.happened_at, last.happened_at + 1, 0, last.number});
    if (!ties) return tl::unexpected(ties.error());
    std::move(ties->begin(), ties->end(), std::back_inserter(*rows));
    const auto following = log_.history({request.drive, last.happened_at + 1, request.until, 1, 0});
    if (!following) return tl::unexpected(following.error());
    if (!following->empty()) answer.next = wire::format_time(following->front().event.happened_at);
  }
  for (auto& row : *rows) answer.rows.push_back(std::move(row.reply));
  Settled settled;
  if (task.answers) settled.reply = std::move(answer);
  return settled;
}

}  // namespace halfturn::service
