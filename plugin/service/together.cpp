// SPDX-License-Identifier: Apache-2.0
#include "plugin/service/together.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "plugin/wire/values.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::service {
namespace {

using constants::kTwoPi;
using recalibrate::Time;

constexpr std::size_t kMostName = 120;  // of the joined names, characters

std::string place(std::size_t i, const std::string& field) { return "scans[" + std::to_string(i) + "]" + (field.empty() ? "" : "." + field); }

/// A number that all scans state alike, or none.
Result<void> same_statement(const std::vector<wire::Scan>& scans, std::optional<double> wire::Scan::* member, const std::string& field,
                            const std::string& why, bool equal) {
  const auto& first = scans.front().*member;
  for (std::size_t i = 1; i < scans.size(); ++i) {
    const auto& other = scans[i].*member;
    if (first.has_value() != other.has_value())
      return fault("missing_field", place(other ? 0 : i, field), "found none, expected a number as with `" + place(other ? i : 0, field) + "`; " + why);
    if (equal && first && !recalibrate::same_amplitude(*first, *other))
      return fault("bad_value", place(i, field), "found " + wire::number_text(*other) + ", expected that of the first scan, " +
                                                     wire::number_text(*first) + "; " + why);
  }
  return {};
}

std::size_t latest(const std::vector<wire::Scan>& scans, Time received_at) {
  const auto taken = [received_at](const wire::Scan& scan) { return scan.taken_at.value_or(received_at); };
  std::size_t found = 0;
  for (std::size_t i = 1; i < scans.size(); ++i)
    if (taken(scans[i]) >= taken(scans[found])) found = i;
  return found;
}

/// The model's view of the scans; `models` keeps the arrays.
std::vector<infer::JointScan> joint_scans(const std::vector<wire::Scan>& scans, const std::vector<infer::Prior>& priors, Time received_at,
                                          std::vector<ModelScan>& models) {
  const auto& carrier = scans[latest(scans, received_at)].carrier_hz;
  std::vector<infer::JointScan> joint;
  models.reserve(scans.size());
  for (std::size_t i = 0; i < scans.size(); ++i) {
    models.push_back(model_scan(scans[i]));
    models.back().batch.axis = models.back().axis;
    joint.push_back({models.back().batch, priors[i], carrier && scans[i].carrier_hz ? kTwoPi * (*scans[i].carrier_hz - *carrier) : 0.0});
  }
  return joint;
}

std::string joined_names(const std::vector<wire::Scan>& scans) {
  std::string names;
  for (const auto& scan : scans) names += (names.empty() || scan.scan_name.empty() ? "" : " + ") + scan.scan_name;
  return names.size() > kMostName ? std::to_string(scans.size()) + " scans together" : names;
}

}  // namespace

Result<void> check_together(const std::vector<wire::Scan>& scans, const config::Drive* drive, const wire::Options& options) {
  if (scans.size() < 2) return fault("bad_shape", "scans", "found one scan, expected at least two; send a single one as `scan`");
  if (scans.size() > infer::kMostJointScans)
    return fault("bad_shape", "scans",
                 "found " + std::to_string(scans.size()) + " scans, expected at most " + std::to_string(infer::kMostJointScans) +
                     ": each adds a floor and a contrast of its own, and a fit has at most " + std::to_string(infer::kMaxParameters) +
                     " free parameters. Choose those with most cycles and most different spacing");
  if (auto same = same_statement(scans, &wire::Scan::drive_amplitude, "drive_amplitude",
                                 "scans fitted together share the Rabi frequency, so they must be taken at one drive amplitude", true); !same)
    return same;
  if (auto same = same_statement(scans, &wire::Scan::carrier_hz, "carrier_hz",
                                 "scans fitted together share the line, so state the carrier with each of them or with none", false); !same)
    return same;
  std::vector<std::string> assumed;
  std::vector<infer::Prior> priors;
  for (const auto& scan : scans) priors.push_back(prior_for(drive, {}, scan, options, 0, assumed));
  std::vector<ModelScan> models;
  const auto joint = joint_scans(scans, priors, 0, models);
  for (const auto dynamics : infer::kAllDynamics)
    if (priors.front().candidates.has(dynamics) && infer::joint_parameters(joint, dynamics) <= infer::kMaxParameters) return {};
  return fault("bad_shape", "scans",
               "found " + std::to_string(scans.size()) + " scans, which under the dynamics asked for have more than " +
                   std::to_string(infer::kMaxParameters) + " free parameters; send fewer, or allow dynamics with one rate");
}

Time latest_taken(const std::vector<wire::Scan>& scans, Time received_at) {
  return scans[latest(scans, received_at)].taken_at.value_or(received_at);
}

Together fit_together(const std::vector<wire::Scan>& scans, const config::Drive* drive, const recalibrate::State& state,
                      const wire::Options& options, Time received_at, infer::FitWorkspace& workspace) {
  Together out;
  std::vector<infer::Prior> priors;
  for (const auto& scan : scans) priors.push_back(prior_for(drive, state, scan, options, scan.taken_at.value_or(received_at), out.assumed));
  auto& said = out.assumed;
  for (auto it = said.begin(); it != said.end();) it = std::find(said.begin(), it, *it) != it ? said.erase(it) : it + 1;
  std::vector<ModelScan> models;
  const auto joint = joint_scans(scans, priors, received_at, models);
  infer::fit_joint(joint, fit_options(drive, options), out.fit, workspace);
  out.prior = priors[out.fit.reference];
  // What is known of the line is told from the carrier that the answer refers to.
  if (out.prior.detuning) out.prior.detuning->mean -= joint[out.fit.reference].carrier;
  return out;
}

recalibrate::JointDecision decide_together(const recalibrate::State& state, const infer::JointFit& fit, const infer::Prior& prior,
                                           const std::vector<wire::Scan>& scans, const config::Drive* drive, Time received_at) {
  const wire::Scan all = standing_for(scans, fit.reference, received_at);
  auto context = context_for(drive, all, prior, latest_taken(scans, received_at));
  for (const auto& scan : scans) context.scan_names.push_back(scan.scan_name);
  return recalibrate::decide_joint(state, fit, prior, context);
}

wire::Scan standing_for(const std::vector<wire::Scan>& scans, std::size_t reference, Time received_at) {
  wire::Scan all = scans[reference];
  all.scan_name = joined_names(scans);
  all.carrier_hz = scans[latest(scans, received_at)].carrier_hz;
  for (const auto& scan : scans) all.ambient.insert(scan.ambient.begin(), scan.ambient.end());
  return all;
}

void add_scans(const std::vector<wire::Scan>& scans, const infer::JointFit& fit, wire::Fitted& fitted) {
  fitted.quality.distrusted.clear();
  for (std::size_t i = 0; i < scans.size(); ++i) {
    wire::JointScan& out = fitted.scans.emplace_back();
    out.scan_name = scans[i].scan_name;
    out.axis_kind = scans[i].axis_kind;
    out.taken_at = scans[i].taken_at;
    out.points = static_cast<std::int64_t>(scans[i].axis.size());
    out.deviance = out.dof = out.p_value = out.strain = std::numeric_limits<double>::quiet_NaN();
    if (i >= fit.parts.size()) continue;
    const auto& part = fit.parts[i];
    out.points = part.points;
    out.deviance = part.deviance;
    out.dof = part.dof;
    out.p_value = part.p_value;
    out.scatter = part.scatter;
    out.strain = part.strain;
    out.distrusted.assign(part.distrusted.begin(), part.distrusted.end());
  }
}

log::Event line_event_from(const Answer& answer, const infer::Fit& line, const recalibrate::FitEvent& event, const wire::Fitted& fitted) {
  recalibrate::Decision decision = answer.decision;
  decision.event = event;
  decision.pulses.clear();
  wire::Scan scan = answer.scan;
  scan.axis_kind = wire::AxisKind::detuning;
  return event_from({scan, answer.options, answer.drive, answer.prior, line, decision, {}, answer.taken_at}, fitted);
}

}  // namespace halfturn::service
