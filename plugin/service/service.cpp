// SPDX-License-Identifier: Apache-2.0
#include "plugin/service/service.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"
#include "model/recalibrate/gates.hpp"
#include "model/recalibrate/pulse_value.hpp"
#include "plugin/service/answer.hpp"
#include "plugin/service/known.hpp"
#include "plugin/service/together.hpp"
#include "plugin/wire/time.hpp"
#include "plugin/wire/words.hpp"

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

// 5 min: clocks that no time service keeps, of two machines of a laboratory, differ by as much.
constexpr Time kClocksDiffer = 300LL * 1'000'000'000;

/// A time in the future would stay the newest of its drive until then, and be taken for the state of things.
Result<void> check_time(const std::optional<Time>& time, Time now, const std::string& where) {
  if (!time || *time <= now + kClocksDiffer) return {};
  return fault("bad_value", where,
               "found " + wire::format_time(*time) + ", expected a time at most 5 min ahead of this computer's clock, which shows " +
                   wire::format_time(now) + ": set the clocks of both computers, in UTC");
}

Result<void> check_times(const wire::Request& request, Time now) {
  for (std::size_t i = 0; i < request.scans.size(); ++i) {
    const auto place = request.joint ? "scans[" + std::to_string(i) + "]" : std::string("scan");
    if (auto checked = check_time(request.scans[i].taken_at, now, place + ".taken_at"); !checked) return checked;
  }
  return check_time(request.applied_at, now, "applied_at");
}

constexpr double kSlip = 10.0;  // beyond a limit; a slip of units is a factor of 1000, an adventurous length is not

constexpr double kRounding = 1e-9;  // of a length that was reckoned in other units

const recalibrate::Pulse* find_pulse(const config::Drive& drive, const std::string& name) {
  for (const auto& pulse : drive.pulses)
    if (pulse.name == name) return &pulse;
  return nullptr;
}

std::string limits_of(const recalibrate::Pulse& pulse) {
  return recalibrate::value_text(pulse, pulse.minimum) + " to " + recalibrate::value_text(pulse, pulse.maximum);
}

std::string expected_of(const recalibrate::Pulse& pulse) {
  const std::string such = wire::number_text(pulse.configured());
  if (pulse.adjust == recalibrate::Adjust::amplitude)
    return "its relative drive amplitude, such as " + such + "; look for a length or a voltage sent in its place, or widen the limits";
  return "its length in seconds, such as " + such + "; look for a slip of units (\u00b5s or ns sent as s), or widen the limits";
}

Result<void> check_value(const config::Drive& drive, const std::string& name, double value) {
  const std::string where = "pulses." + name;
  const auto* pulse = find_pulse(drive, name);
  if (pulse == nullptr)
    return fault("bad_value", where, "the drive `" + drive.name + "` has no pulse of that name in the configuration");
  if (value >= pulse->minimum / kSlip && value <= pulse->maximum * kSlip) return {};
  return fault("bad_value", where,
               "found " + wire::number_text(value) + ", which is far outside the pulse's limits, " + limits_of(*pulse) + ": expected " +
                   expected_of(*pulse));
}

/// What is wrong with a drive, each with what to do about it.
std::vector<std::string> troubles_of(const config::Drive& drive, const recalibrate::State& state) {
  std::vector<std::string> troubles;
  if (state.held)
    troubles.push_back("held by " + state.held_by + " (" + state.held_why +
                       "), so every verdict is keep. Send `release` once its pulses may change again.");
  if (state.proposals_unanswered >= recalibrate::kUnansweredSaid)
    troubles.push_back(std::to_string(state.proposals_unanswered) +
                       " proposals went by without an `applied` message. Have the control software load what is proposed, and send "
                       "`applied` with the values that it uses; else `hold` the drive.");
  for (const auto& pulse : drive.pulses) {
    const double value = recalibrate::in_force(state, pulse);
    if (value >= pulse.minimum * (1.0 - kRounding) && value <= pulse.maximum * (1.0 + kRounding)) continue;
    const std::string what = recalibrate::value_name(pulse);
    troubles.push_back("the pulse `" + pulse.name + "` in force, " + recalibrate::value_text(pulse, value) + ", lies outside its limits, " +
                       limits_of(pulse) + ". Load " + (what == "length" ? "a " : "an ") + what + " within them and send `applied`, or widen `limits` in the configuration.");
  }
  return troubles;
}

Result<void> check_drive(const wire::Request& request, const config::Configuration& configuration) {
  if (configuration.drives.count(request.drive) == 0)
    return fault("unknown_drive", "drive",
                 "found `" + request.drive + "`, which the configuration does not have; it has " + known_drives(configuration));
  for (const auto& [name, value] : request.pulses)
    if (auto checked = check_value(configuration.drives.at(request.drive), name, value); !checked) return checked;
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
  if (checked) checked = check_times(request, task.received_at);
  task.drive = fits ? request.scans.front().drive : request.drive;
  if (checked && request.joint) checked = check_together(request.scans, task.configured(), request.options);
  if (!checked) return refuse(request, checked.error());
  if (fits) task.taken_at = latest_taken(request.scans, task.received_at);
  if (!fits || request.options.store) task.known = known_of(task.drive);
  task.request = std::move(request);
  return task;
}

void Service::fit(Task& task) {
  const auto* drive = task.configured();
  const auto& options = task.request.options;
  task.assumed.clear();
  thread_local infer::FitWorkspace workspace;
  if (task.request.joint) {
    auto together = fit_together(task.request.scans, drive, task.known, options, task.received_at, workspace);
    task.joint = std::move(together.fit);
    task.prior = std::move(together.prior);
    task.assumed = std::move(together.assumed);
    return;
  }
  task.prior = prior_for(drive, task.known, task.scan(), options, task.taken_at, task.assumed);
  const ModelScan scan = model_scan(task.scan());
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
    const auto found = states_.find(name);
    const recalibrate::State state = found == states_.end() ? recalibrate::State{} : found->second;
    for (const auto& pulse : drive.pulses)
      (pulse.adjust == recalibrate::Adjust::amplitude ? out.amplitudes : out.pulses_s)[pulse.name] = recalibrate::in_force(state, pulse);
    if (found == states_.end()) continue;
    if (state.rabi.accepted > 0) out.rabi_hz = std::exp(state.rabi.mean) / constants::kTwoPi;
    if (state.gain.accepted > 0) out.rabi_per_amplitude_hz = std::exp(state.gain.mean) / constants::kTwoPi;
    out.last_verdict = state.last_verdict;
    out.held = state.held;
    for (auto& trouble : troubles_of(drive, state)) now.troubles.push_back(name + ": " + std::move(trouble));
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

Result<wire::Fitted> fit_together_alone(const std::vector<wire::Scan>& scans, const config::Drive* drive, const wire::Options& options) {
  if (auto checked = check_together(scans, drive, options); !checked) return tl::unexpected(checked.error());
  const recalibrate::State nothing;
  infer::FitWorkspace workspace;
  const auto together = fit_together(scans, drive, nothing, options, 0, workspace);
  const auto decision = decide_together(nothing, together.fit, together.prior, scans, drive, 0);
  const wire::Scan all = standing_for(scans, together.fit.reference, 0);
  const Time taken_at = latest_taken(scans, 0);
  wire::Fitted fitted = fitted_from({all, options, drive, together.prior, together.fit.fit, decision.whole, together.assumed, taken_at});
  add_scans(scans, together.fit, fitted);
  if (taken_at == 0) fitted.taken_at.reset();
  return fitted;
}

}  // namespace halfturn::service
