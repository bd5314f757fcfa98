// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/imposter.hpp"

#include <algorithm>
#include <cmath>
#include <optional>

#include "model/quantity/constants.hpp"
#include "tests/campaign/held.hpp"

namespace halfturn::campaign {
namespace {

using constants::kPi;
using constants::kTwoPi;
using infer::Dynamics;

constexpr double kUnstated = 100e-9;  // s, the sigma of a dead time that no configuration states
constexpr double kPlain = 150;        // deviance beyond which an imposter says nothing: power(1e-7) is then 1 - 1e-11
constexpr double kTypical = 2;        // sigmas from what is configured within which a dead time is nothing unusual

double contrast_of(const Apparatus& a) { return a.excited - a.ground; }
bool within(double x, double low, double high) { return low <= x && x <= high; }

wire::References expected_references(const Apparatus& a, wire::References r) {
  r.bright = r.bright_of * std::max(a.ground, a.excited);
  r.dark = r.dark_of * std::min(a.ground, a.excited);
  return r;
}

void set_damping(Dynamics dynamics, const infer::Physical& found, Apparatus& a) {
  a.decay = a.loss = a.dephasing = 0;
  a.ensemble = Ensemble{};
  const double breadth = std::sqrt(std::max(0.0, found.breadth));
  switch (dynamics) {
    case Dynamics::undamped:
    case Dynamics::thermal: break;
    case Dynamics::dephasing: a.dephasing = found.damping; break;
    case Dynamics::decay: a.decay = found.damping; break;
    case Dynamics::leak: a.loss = found.damping; break;
    case Dynamics::decay_dephasing: a.decay = found.damping; a.dephasing = found.dephasing; break;
    case Dynamics::leak_dephasing: a.loss = found.damping; a.dephasing = found.dephasing; break;
    case Dynamics::spread: a.ensemble.rabi_spread = breadth; break;
    case Dynamics::doppler: a.ensemble.detuning_spread_hz = breadth / kTwoPi; break;
    case Dynamics::cloud: a.ensemble.cloud_ratio = breadth; break;
  }
}

Apparatus apparatus_of(const Case& of, const infer::Fit& fit) {
  const auto& found = fit.physical;
  Apparatus a = of.truth;
  a.second_weight = 0;
  a.second_ratio = 1;
  a.rabi = of.truth.line ? found.generalised : found.rabi();
  a.detuning = of.truth.line ? found.line_offset : std::sqrt(std::max(0.0, found.detuning_square));
  a.dead_time = found.dead_time;
  a.ground = found.signal_ground;
  a.excited = found.signal_excited;
  set_damping(fit.chosen, found, a);
  return a;
}

/// Whether a family of flops draws such: the ranges of families.cpp, with anything weaker than their least damping.
bool drawn_as_flop(const Apparatus& a, double span) {
  const auto& e = a.ensemble;
  const bool damping = std::max({a.decay, a.loss, a.dephasing}) * span <= 5;
  const bool breadth = e.rabi_spread <= 0.15 && e.cloud_ratio <= 0.5 && kTwoPi * e.detuning_spread_hz <= 0.7 * a.rabi;
  return damping && breadth && within(a.rabi * span / kTwoPi, 0.3, 30);
}

/// The same of lines (line_families.cpp).
bool drawn_as_line(const Apparatus& a, Dynamics dynamics) {
  const double length = a.pulse_s - a.dead_time, area = a.rabi * length / kPi;
  if (dynamics == Dynamics::undamped) return within(area, 0.3, 4);
  if (dynamics == Dynamics::dephasing) return within(area, 3, 12) && within(a.dephasing * a.pulse_s, 2, 6);
  if (dynamics == Dynamics::decay) return within(area, 0.3, 3) && a.decay * a.pulse_s <= 10;
  if (dynamics != Dynamics::doppler) return false;
  Apparatus narrow = a;
  narrow.ensemble = Ensemble{};
  return within(area, 0.3, 2) && kTwoPi * a.ensemble.detuning_spread_hz <= 2 * line_width(narrow);
}

bool drawn_somewhere(const Case& of, const Apparatus& a, Dynamics dynamics) {
  const auto [first, last] = std::minmax_element(of.scan.axis.begin(), of.scan.axis.end());
  const bool signal = within(a.ground, 0, 1) && within(a.excited, 0, 1) && within(std::abs(contrast_of(a)), 0.04, 0.98);
  return signal && (a.line ? drawn_as_line(a, dynamics) : drawn_as_flop(a, *last - *first));
}

std::optional<Imposter> imposter(const Case& of, const Case& asked, Dynamics dynamics) {
  const auto fit = fit_of(asked);
  if (fit.outcome != infer::FitOutcome::fitted || fit.chosen != dynamics) return std::nullopt;
  const Apparatus a = apparatus_of(of, fit);
  if (!drawn_somewhere(of, a, dynamics)) return std::nullopt;
  if (of.misstated && std::abs(a.dead_time - of.drive.dead_time->mean) > (kTypical + 1e-6) * of.drive.dead_time->sigma) return std::nullopt;
  Imposter found;
  found.dynamics = dynamics;
  found.as = made_by(of, a);
  found.apart = apart(of, found.as);
  if (found.apart.deviance() > kPlain) return std::nullopt;
  found.bound = bound(found.as);
  found.sigma = a.line ? found.bound.offset : found.bound.pulse_s.front();
  return std::isfinite(found.sigma) && found.sigma > 0 ? std::optional(found) : std::nullopt;
}

}  // namespace

Case at_expectation(const Case& of) {
  Case quiet = noiseless(of);
  auto& drive = quiet.drive;
  if (drive.contrast) drive.contrast->mean = contrast_of(of.truth);
  if (drive.floor) drive.floor->mean = of.truth.ground;
  if (quiet.scan.references) quiet.scan.references = expected_references(of.truth, *quiet.scan.references);
  if (!of.misstated) drive.dead_time = infer::Known{of.truth.dead_time, drive.dead_time ? drive.dead_time->sigma : kUnstated};
  return quiet;
}

Case made_by(const Case& of, const Apparatus& apparatus) {
  Case made = of;
  made.truth = apparatus;
  made.true_dynamics.clear();
  made.misstated = false;
  std::vector<double> axis = of.scan.axis;
  if (apparatus.line)
    for (double& at : axis) at *= kTwoPi;
  mean_population(apparatus, axis, made.expected);
  for (double& p : made.expected) p = apparatus.ground + contrast_of(apparatus) * p;
  if (apparatus.line) made.width = line_width(apparatus);
  return at_expectation(made);
}

Apart apart(const Case& truth, const Case& imposter) {
  Apart apart;
  const auto &t = truth.truth, &i = imposter.truth;
  const auto& shots = truth.scan.weight[0];
  for (std::size_t k = 0; k < shots.size(); ++k) apart.add_binomial(shots[k], truth.expected[k], imposter.expected[k]);
  if (const auto& r = truth.scan.references) {
    apart.add_binomial(r->bright_of, std::max(t.ground, t.excited), std::max(i.ground, i.excited));
    apart.add_binomial(r->dark_of, std::min(t.ground, t.excited), std::min(i.ground, i.excited));
  }
  const auto& drive = truth.drive;
  if (drive.contrast) apart.add_normal((contrast_of(t) - contrast_of(i)) / drive.contrast->sigma);
  if (drive.floor) apart.add_normal((t.ground - i.ground) / drive.floor->sigma);
  if (!truth.misstated) apart.add_normal((t.dead_time - i.dead_time) / (drive.dead_time ? drive.dead_time->sigma : kUnstated));
  return apart;
}

std::vector<Imposter> imposters_of(const Case& of) {
  std::vector<Imposter> found;
  const auto ask = [&](Case asked, Dynamics dynamics) {
    asked.drive.dynamics = infer::DynamicsSet::none();
    asked.drive.dynamics->add(dynamics);
    if (auto one = imposter(of, asked, dynamics)) found.push_back(std::move(*one));
  };
  Case quiet = at_expectation(of);
  quiet.drive.pulses.clear();  // their intervals would be searched for
  for (const Dynamics dynamics : infer::kAllDynamics) {
    if (dynamics == Dynamics::thermal) continue;
    if (!of.misstated) ask(quiet, dynamics);
    for (int sigmas = 0; of.misstated && infer::is_simple(dynamics) && sigmas <= 2; ++sigmas) {
      Case held = quiet;
      const auto& configured = *of.drive.dead_time;
      held.drive.dead_time = infer::Known{configured.mean + std::copysign(sigmas * configured.sigma, of.truth.dead_time), 0};
      ask(held, dynamics);
    }
  }
  return found;
}

}  // namespace halfturn::campaign
