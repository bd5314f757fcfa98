// SPDX-License-Identifier: Apache-2.0
#include "plugin/service/service.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"
#include "plugin/service/answer.hpp"
#include "plugin/service/known.hpp"
#include "plugin/wire/decode.hpp"
#include "plugin/wire/encode.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::service {
namespace {


wire::Error error_of(std::string id, Fault fault) { return {std::move(id), std::move(fault), std::nullopt}; }

wire::Reply refuse(const wire::Request& request, Fault fault) { return error_of(request.id, std::move(fault)); }

/// What this version does not do, in words.
std::optional<Fault> not_here(const wire::Request& request) {
  using wire::Kind;
  if (request.kind == Kind::next) return Fault{"not_available", "kind", "`next` is not available in this version"};
  if (request.kind == Kind::begin || request.kind == Kind::points || request.kind == Kind::end)
    return Fault{"not_available", "kind", "scans in progress are not available in this version; send the whole scan as `fit`"};
  return std::nullopt;
}

std::string known_drives(const config::Configuration& configuration) {
  std::string known;
  for (const auto& [name, drive] : configuration.drives) known += (known.empty() ? "" : ", ") + name;
  return known;
}

Result<void> check_drive(const wire::Request& request, const config::Configuration& configuration) {
  if (configuration.drives.count(request.drive) == 0)
    return fault("unknown_drive", "drive",
                 "found `" + request.drive + "`, which the configuration does not have; it has " + known_drives(configuration));
  for (const auto& [name, length] : request.pulses_s) {
    bool found = false;
    for (const auto& pulse : configuration.drives.at(request.drive).pulses) found = found || pulse.name == name;
    if (!found) return fault("bad_value", "pulses." + name, "the drive `" + request.drive + "` has no pulse of that name in the configuration");
  }
  return {};
}

}  // namespace

const config::Drive* Task::configured() const {
  const auto found = configuration->drives.find(drive);
  return found == configuration->drives.end() ? nullptr : &found->second;
}

Service::Service(std::shared_ptr<const config::Configuration> configuration, log::Log& log, const Clock& clock, std::string version)
    : configuration_(std::move(configuration)), log_(log), clock_(clock), version_(std::move(version)), started_at_(clock.now()) {}

recalibrate::State Service::known_of(const std::string& drive) const {
  const std::lock_guard lock(mutex_);
  const auto found = states_.find(drive);
  return found == states_.end() ? recalibrate::State{} : found->second;
}

Result<void> Service::restore() {
  std::map<std::string, recalibrate::State> states;
  if (auto replayed = log_.replay([&states](const log::Event& event) { fold(states[event.drive], event); }); !replayed)
    return tl::unexpected(replayed.error());
  std::shared_ptr<const config::Configuration> configuration;
  {
    const std::lock_guard lock(mutex_);
    states_ = std::move(states);
    configuration = configuration_;
  }
  const Time now = clock_.now();
  if (auto begun = log_.begin(); !begun) return begun;
  auto kept = log_.keep_configuration(configuration->fingerprint, configuration->text, now);
  if (kept) kept = log_.forget_replies(now - kRepliesKept);
  if (kept) kept = log_.commit();
  if (!kept) {
    log_.roll_back();
    return kept;
  }
  kept_configurations_ = {configuration->fingerprint};
  forgot_at_ = now;
  return {};
}

std::variant<wire::Reply, Task> Service::accept(wire::Request request, bool answers) {
  if (request.kind == wire::Kind::status) {
    wire::State now = state();
    now.id = request.id;
    return wire::Reply{std::move(now)};
  }
  Task task;
  task.received_at = clock_.now();
  task.answers = answers;
  {
    const std::lock_guard lock(mutex_);
    if (stopping_) return refuse(request, {"stopping", "", "the daemon is stopping; send the request again when it runs"});
    task.configuration = configuration_;
  }
  if (auto missing = not_here(request)) return refuse(request, std::move(*missing));
  const bool fits = request.kind == wire::Kind::fit;
  auto checked = fits ? check_scan(request, *task.configuration) : check_drive(request, *task.configuration);
  if (!checked) return refuse(request, checked.error());
  task.drive = fits ? request.scans.front().drive : request.drive;
  if (fits) task.taken_at = request.scans.front().taken_at.value_or(task.received_at);
  if (!fits || request.options.store) task.known = known_of(task.drive);
  task.request = std::move(request);
  return task;
}

void Service::fit(Task& task) {
  const auto* drive = task.configured();
  const auto& options = task.request.options;
  task.assumed.clear();
  task.prior = prior_for(drive, task.known, task.scan(), options, task.taken_at, task.assumed);
  const ModelScan scan = model_scan(task.scan());
  thread_local infer::FitWorkspace workspace;
  task.fit.emplace();
  infer::fit(scan.batch, {&task.prior, 1}, fit_options(drive, options), {&*task.fit, 1}, workspace);
}

void Service::configure(std::shared_ptr<const config::Configuration> configuration) {
  const std::lock_guard lock(mutex_);
  configuration_ = std::move(configuration);
}

void Service::set_stopping() {
  const std::lock_guard lock(mutex_);
  stopping_ = true;
}

wire::State Service::state() const {
  const std::lock_guard lock(mutex_);
  wire::State now;
  now.version = version_;
  now.uptime_s = static_cast<double>(clock_.now() - started_at_) / 1e9;
  now.stopping = stopping_;
  now.log = log_trouble_.empty() ? "ok" : log_trouble_;
  if (!log_trouble_.empty()) now.troubles.push_back("log: " + log_trouble_);
  for (const auto& [name, drive] : configuration_->drives) {
    wire::DriveState& out = now.drives[name];
    for (const auto& pulse : drive.pulses) out.pulses_s[pulse.name] = pulse.length_s;
    const auto found = states_.find(name);
    if (found == states_.end()) continue;
    const auto& state = found->second;
    for (const auto& [pulse, length] : state.in_force_s)
      if (out.pulses_s.count(pulse) > 0) out.pulses_s[pulse] = length;
    if (state.rabi.accepted > 0) out.rabi_hz = std::exp(state.rabi.mean) / constants::kTwoPi;
    out.last_verdict = state.last_verdict;
    out.held = state.held;
    if (state.held) now.troubles.push_back(name + ": held by " + state.held_by + ": " + state.held_why);
    if (state.proposals_unanswered >= 3)
      now.troubles.push_back(name + ": " + std::to_string(state.proposals_unanswered) + " proposals without an `applied` message");
  }
  return now;
}

wire::Fitted fit_alone(const wire::Scan& scan, const config::Drive* drive, const wire::Options& options) {
  std::vector<std::string> assumed;
  const recalibrate::State nothing;
  const Time taken_at = scan.taken_at.value_or(0);
  const auto prior = prior_for(drive, nothing, scan, options, taken_at, assumed);
  const ModelScan model = model_scan(scan);
  infer::FitWorkspace workspace;
  infer::Fit fit;
  infer::fit(model.batch, {&prior, 1}, fit_options(drive, options), {&fit, 1}, workspace);
  const auto decision = recalibrate::decide(nothing, fit, prior, context_for(drive, scan, prior, taken_at));
  wire::Fitted fitted = fitted_from({scan, options, drive, prior, fit, decision, assumed, taken_at});
  fitted.taken_at = scan.taken_at;
  return fitted;
}

}  // namespace halfturn::service
