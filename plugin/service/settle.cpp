// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <iterator>
#include <set>

#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"
#include "plugin/service/answer.hpp"
#include "plugin/service/known.hpp"
#include "plugin/service/service.hpp"
#include "plugin/service/together.hpp"
#include "plugin/wire/decode.hpp"
#include "plugin/wire/encode.hpp"
#include "plugin/wire/time.hpp"

/// Stage three: decisions, and the transaction that commits them.
namespace halfturn::service {
namespace {

constexpr std::int64_t kHistoryRows = 1000;
constexpr Time kDay = 24LL * 3600 * 1'000'000'000;

/// Takes back what was not committed, whichever way the group is left.
struct Rollback {
  log::Log& log;
  ~Rollback() { log.roll_back(); }
};

/// Whether a task changes the log; all others are settled without a transaction.
bool writes(const Task& task) { return task.request.kind != wire::Kind::history && (!task.needs_fit() || task.request.options.store); }

/// A fault for who asked, or for who listens where the task came by the feed.
Settled unanswered(const Task& task, Fault fault) {
  const wire::Error error{task.request.id, std::move(fault), std::nullopt};
  Settled settled;
  if (task.answers) settled.reply = error;
  else settled.publications.push_back({"rejected/", error});
  return settled;
}

/// Lengths and amplitudes of what the experiment reports, each as the configuration adjusts the pulse.
void sort_pulses(const config::Drive* drive, const std::map<std::string, double>& reported, log::Event& event) {
  for (const auto& [name, value] : reported) {
    const auto named = [&name = name](const recalibrate::Pulse& pulse) { return pulse.name == name; };
    const bool by_amplitude = drive != nullptr && std::any_of(drive->pulses.begin(), drive->pulses.end(), [&](const auto& pulse) {
                                return named(pulse) && pulse.adjust == recalibrate::Adjust::amplitude;
                              });
    (by_amplitude ? event.amplitudes : event.pulses_s)[name] = value;
  }
}

log::Event noted_event(const Task& task) {
  const auto& request = task.request;
  log::Event event;
  event.drive = request.drive;
  event.kind = request.kind == wire::Kind::applied ? "applied" : request.kind == wire::Kind::hold ? "hold" : "release";
  event.happened_at = request.applied_at.value_or(task.received_at);
  event.received_at = task.received_at;
  event.id = request.id;
  sort_pulses(task.configured(), request.pulses, event);
  if (request.carrier_hz) event.carrier_hz = *request.carrier_hz;
  event.by = request.by;
  event.why = request.why;
  return event;
}

/// What is decided on a task, and how the rows of a joint fit differ from one scan's.
struct Judged {
  recalibrate::JointDecision decision;  // of one scan its `whole` alone
  wire::Scan all;                       // of a joint fit what stands for its scans
  const infer::Fit& fit;
};

Judged judge_task(const Task& task, const recalibrate::State& state) {
  const auto* drive = task.configured();
  if (!task.joint)
    return {{recalibrate::decide(state, *task.fit, task.prior, context_for(drive, task.scan(), task.prior, task.taken_at)), std::nullopt}, {}, *task.fit};
  const auto& scans = task.request.scans;
  return {decide_together(state, *task.joint, task.prior, scans, drive, task.received_at),
          standing_for(scans, task.joint->reference, task.received_at), task.joint->fit};
}

/// A tracked logarithm of rad/s, in Hz, with its interval of 95 %.
wire::Estimate tracked_hz(const infer::Known& known) {
  const double value = std::exp(known.mean) / constants::kTwoPi, reach = infer::normal_quantile(0.975) * known.sigma;
  return {value, value * known.sigma, value * std::exp(-reach), value * std::exp(reach), ""};
}

wire::Drift drift_of(const std::string& drive, const recalibrate::State& state, Time at) {
  wire::Drift drift;
  drift.drive = drive;
  if (const auto known = state.rabi.predict(at)) drift.rabi_hz = tracked_hz(*known);
  if (const auto known = state.gain.predict(at)) drift.rabi_per_amplitude_hz = tracked_hz(*known);
  return drift;
}

}  // namespace

/// What will hold once the group is committed.
struct Service::Group {
  std::map<std::string, recalibrate::State> states;
  std::set<std::string> kept_configurations;
  std::optional<Time> forgot_at;
  recalibrate::State& of(const Service& service, const std::string& drive) {
    const auto found = states.find(drive);
    return found != states.end() ? found->second : states.emplace(drive, service.known_of(drive)).first->second;
  }
};

std::vector<Settled> Service::settle(std::span<Task> tasks) {
  std::vector<Settled> settled(tasks.size());
  std::vector<std::size_t> writers;  // that wait for their transaction
  Result<void> written;
  const auto write = [&] {
    if (written) written = settle_writers(tasks, writers, settled);
    if (!written)
      for (const auto i : writers) settled[i] = unanswered(tasks[i], {"log_unavailable", "", written.error().message});
    writers.clear();
  };
  for (std::size_t i = 0; i < tasks.size(); ++i) {
    Task& task = tasks[i];
    if (writes(task)) {
      writers.push_back(i);
      continue;
    }
    // What is read of the history shows what came before it, and nothing that came later.
    if (task.request.kind == wire::Kind::history) write();
    Group none;
    auto one = task.request.kind == wire::Kind::history ? settle_history(task) : settle_fit(task, none);
    if (!one) note_log(one.error().message);
    settled[i] = one ? std::move(*one) : unanswered(task, {"log_unavailable", "", one.error().message});
  }
  write();
  return settled;
}

/// One transaction. A failure is the log's, and then nothing has changed.
Result<void> Service::settle_writers(std::span<Task> tasks, const std::vector<std::size_t>& chosen, std::vector<Settled>& settled) {
  if (chosen.empty()) return {};
  Group group;
  const auto decided = [&]() -> Result<void> {
    const Rollback rollback{log_};
    if (auto begun = log_.begin(); !begun) return begun;
    if (auto kept = keep_house(group); !kept) return kept;
    for (const auto i : chosen) {
      auto one = settle_one(tasks[i], group);
      if (!one) return tl::unexpected(one.error());
      settled[i] = std::move(*one);
    }
    return log_.commit();
  }();
  note_log(decided ? "" : decided.error().message);
  if (!decided) return decided;
  kept_configurations_.merge(group.kept_configurations);
  forgot_at_ = group.forgot_at.value_or(forgot_at_);
  const std::lock_guard lock(mutex_);
  for (auto& [drive, state] : group.states) states_[drive] = std::move(state);
  return {};
}

/// Once a day the replies of more than a week ago go.
Result<void> Service::keep_house(Group& group) {
  const Time now = clock_.now();
  if (now - forgot_at_ < kDay) return {};
  group.forgot_at = now;
  return log_.forget_replies(now - kRepliesKept);
}

/// The text of a configuration, before the first fit that names it.
Result<void> Service::keep_configuration(const config::Configuration& configuration, Group& group) {
  if (kept_configurations_.count(configuration.fingerprint) > 0) return {};
  if (!group.kept_configurations.insert(configuration.fingerprint).second) return {};
  return log_.keep_configuration(configuration.fingerprint, configuration.text, clock_.now());
}

void Service::note_log(std::string trouble) {
  const std::lock_guard lock(mutex_);
  log_trouble_ = std::move(trouble);
}

Result<Settled> Service::settle_one(Task& task, Group& group) {
  const auto& request = task.request;
  auto before = log_.find_reply(request.id);
  if (!before) return tl::unexpected(before.error());
  if (*before && (*before)->digest != request.digest)
    return unanswered(task, {"id_reused", "id", "this id came before with other content; give every request an id of its own, such as a UUID"});
  if (*before) {
    Settled again;
    if (task.answers) again.reply = wire::Stored{request.id, std::move((*before)->reply)};
    return again;
  }
  return task.needs_fit() ? settle_fit(task, group) : settle_note(task, group);
}

Result<Settled> Service::settle_fit(Task& task, Group& group) {
  const bool store = task.request.options.store;
  static const recalibrate::State kNothing;
  const recalibrate::State before = store ? group.of(*this, task.drive) : kNothing;
  const Judged judged = judge_task(task, before);
  const auto& decision = judged.decision.whole;
  const Answer answer{task.joint ? judged.all : task.scan(), task.request.options, task.configured(), task.prior, judged.fit, decision, task.assumed,
                      task.taken_at};
  wire::Fitted fitted = fitted_from(answer);
  if (task.joint) add_scans(task.request.scans, *task.joint, fitted);
  fitted.id = task.request.id;
  fitted.stored = store;

  Settled settled;
  if (store) {
    log::Event event = event_from(answer, fitted);
    event.received_at = task.received_at;
    event.id = task.request.id;
    const std::string reply = wire::encode_stored(fitted);
    if (auto kept = keep_configuration(*task.configuration, group); !kept) return tl::unexpected(kept.error());
    const log::Bulk bulk{wire::encode_scans(task.request.scans), task.request.digest, task.configuration->fingerprint, reply, answer.scan.ambient};
    if (auto number = log_.append(event, &bulk); !number) return tl::unexpected(number.error());
    if (auto kept = log_.keep_reply(task.request.id, {task.request.digest, reply}, task.received_at); !kept) return tl::unexpected(kept.error());
    auto& state = group.of(*this, task.drive);
    fold(state, event);
    if (judged.decision.line) {
      // The same fit moves the line's track: a row of its own, without the bulk.
      log::Event line = line_event_from(answer, *task.joint->line, *judged.decision.line, fitted);
      line.received_at = task.received_at;
      line.id = task.request.id;
      if (auto number = log_.append(line, nullptr); !number) return tl::unexpected(number.error());
      fold(state, line);
    }
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
  for (auto& row : *rows)
    if (!row.reply.empty()) answer.rows.push_back(std::move(row.reply));  // the line's row of a joint fit has none of its own
  Settled settled;
  if (task.answers) settled.reply = std::move(answer);
  return settled;
}

}  // namespace halfturn::service
