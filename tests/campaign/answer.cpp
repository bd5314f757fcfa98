// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/answer.hpp"

#include <algorithm>
#include <cmath>
#include <stdexcept>

#include "model/infer/fit.hpp"
#include "model/infer/outliers.hpp"
#include "model/infer/scan_objective.hpp"
#include "plugin/log/memory_log.hpp"
#include "plugin/service/known.hpp"
#include "plugin/service/service.hpp"

namespace halfturn::campaign {
namespace {

struct StandingClock final : service::Clock {
  wire::Time time = 0;
  wire::Time now() const override { return time; }
};

wire::Fitted through_service(const Case& of, const wire::Options& options) {
  auto configuration = std::make_shared<config::Configuration>();
  configuration->drives[of.drive.name] = of.drive;
  log::MemoryLog log;
  StandingClock clock;
  service::Service service(configuration, log, clock, "campaign");
  std::vector<wire::Scan> scans = of.before;
  scans.push_back(of.scan);
  wire::Fitted last;
  for (std::size_t i = 0; i < scans.size(); ++i) {
    wire::Request request;
    request.kind = wire::Kind::fit;
    request.id = request.digest = std::to_string(i);
    request.scans = {scans[i]};
    request.options = options;
    clock.time = scans[i].taken_at.value_or(0);
    auto accepted = service.accept(std::move(request), true);
    auto* task = std::get_if<service::Task>(&accepted);
    if (task == nullptr) throw std::logic_error("campaign: the service did not accept a simulated scan");
    service::Service::fit(*task);
    const auto settled = service.settle({task, 1});
    const auto* fitted = settled.front().reply ? std::get_if<wire::Fitted>(&*settled.front().reply) : nullptr;
    if (fitted == nullptr) throw std::logic_error("campaign: the service did not answer a simulated scan");
    last = *fitted;
  }
  return last;
}

struct Refit {
  service::ModelScan scan;
  infer::Fit fit;
};

/// The fit of the case's scan; a reply does not carry all of it.
Refit refit(const Case& of) {
  Refit again;
  std::vector<std::string> assumed;
  const auto prior = service::prior_for(&of.drive, {}, of.scan, {}, 0, assumed);
  again.scan = service::model_scan(of.scan);
  infer::FitWorkspace workspace;
  infer::fit(again.scan.batch, {&prior, 1}, service::fit_options(&of.drive, {}), {&again.fit, 1}, workspace);
  return again;
}

/// Starting points near which the least deviance with a quantity held is looked for.
std::vector<infer::Physical> starts(const Case& of, const infer::Physical& fitted) {
  const auto& t = of.truth;
  infer::Physical truth = fitted;
  truth.generalised = t.line ? t.rabi : t.generalised();
  truth.line_offset = t.line ? t.detuning : 0;
  truth.detuning_square = t.line ? 0 : t.detuning * t.detuning;
  truth.dead_time = t.dead_time;
  truth.signal_ground = std::clamp(t.ground, 0.005, 0.995);
  truth.signal_excited = std::clamp(t.excited, 0.005, 0.995);
  infer::Physical mixed = fitted;
  mixed.dead_time = t.dead_time;
  return {fitted, truth, mixed};
}

}  // namespace

wire::Fitted answer(const Case& of, double level, const std::string& dynamics) {
  wire::Options options;
  options.level = level;
  options.overlay_points = 0;
  if (!dynamics.empty()) options.dynamics = {dynamics};
  return of.before.empty() ? service::fit_alone(of.scan, &of.drive, options) : through_service(of, options);
}

double held_against(const Case& of, std::size_t pulse, double value) {
  const Refit again = refit(of);
  const auto& fit = again.fit;
  if (fit.outcome != infer::FitOutcome::fitted) return std::nan("");
  infer::Prior prior = fit.prior;
  if (of.misstated) prior.dead_time.sigma = std::abs(of.truth.dead_time - prior.dead_time.mean);
  infer::ObjectiveWorkspace work;
  work.reserve(of.scan.axis.size());
  infer::Lead lead;
  if (!of.truth.line) lead = {infer::Lead::Kind::pulse_length, of.drive.pulses[pulse].angle_rad, of.drive.pulses[pulse].area_factor};
  auto readout = again.scan.batch.site(0);
  std::vector<double> odds(fit.outlier_share > 0 ? of.scan.axis.size() : 0);
  if (!odds.empty()) infer::outlier_odds(readout, fit.outlier_share, odds);
  readout.odds = odds;
  readout.dispersion = fit.dispersion;
  double held = INFINITY, free = INFINITY;
  for (int candidate = 0; candidate < 4; ++candidate) {
    for (auto start : starts(of, fit.physical)) {
      const auto dynamics = static_cast<infer::Dynamics>(candidate);
      if (dynamics != fit.chosen || !(start.damping > 0)) start.damping = dynamics == infer::Dynamics::undamped ? 0 : 0.02 * start.generalised;
      const infer::ScanObjective objective(again.scan.batch, readout, prior, dynamics, lead, start.contrast() < 0, work);
      auto bounds = objective.bounds();
      auto x = objective.pack(start);
      const auto unbound = infer::minimise(objective, x, bounds);
      if (std::isfinite(unbound.value)) free = std::min(free, unbound.value);
      const int slot = of.truth.line ? objective.layout().line_offset : objective.layout().lead;
      x[slot] = bounds.lower[slot] = bounds.upper[slot] = value;
      const auto bound = infer::minimise(objective, x, bounds);
      if (std::isfinite(bound.value)) held = std::min(held, bound.value);
    }
  }
  return 2 * (held - free) * fit.dispersion / fit.quality.scatter;
}

double left_by_one_line(const Case& of) {
  Case noiseless = of;
  for (std::size_t i = 0; i < of.expected.size(); ++i) noiseless.scan.observed[0][i] = of.expected[i] * of.scan.weight[0][i];
  const auto fit = refit(noiseless).fit;
  return fit.outcome == infer::FitOutcome::fitted ? fit.quality.deviance : INFINITY;
}

}  // namespace halfturn::campaign
