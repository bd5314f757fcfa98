// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <limits>

#include "model/dynamics/ensemble.hpp"
#include "model/dynamics/members.hpp"
#include "model/dynamics/motion.hpp"

namespace halfturn::dynamics {
namespace {

using namespace detail;
using Kind = Ensemble::Kind;

constexpr double kNaN = std::numeric_limits<double>::quiet_NaN();
constexpr OfParameter kNone{kNaN, kNaN};

// What one member costs, two functions of an angle in some six steps of Newton's, in units of merging one level into one (Demand::cost):
// of a hot state's thousand levels two dozen are left, and a length whose maximum is about to cease takes 20 ms instead of seconds.
constexpr double kCostOfMember = 200.0;

/// First and second derivative of the mean of cos(x phase - angle) by the phase, and of the first by the parameter.
struct Slopes {
  double first, second, first_by_parameter;
};

Slopes slopes(const Members& members, double phase, double angle) {
  Slopes sum{0, 0, 0};
  for (std::size_t i = 0; i < members.size(); ++i) {
    const double x = members.scale[i], w = members.weight[i], turned = x * phase - angle;
    const double sine = std::sin(turned), cosine = std::cos(turned);
    sum.first -= w * x * sine;
    sum.second -= w * x * x * cosine;
    sum.first_by_parameter -= members.by_weight[i] * x * sine + w * members.by_scale[i] * (sine + x * phase * cosine);
  }
  return sum;
}

/// exp(-(s phase)^2/2) cos(phase - angle) is largest where tan(phase - angle) = -s^2 phase; phase + atan(s^2 phase) grows
/// everywhere, so the root is the only one within a quarter turn of the angle.
OfParameter spread_phase(double s, double angle) {
  const double s2 = s * s;
  double phase = angle;
  for (int step = 0; step < 60; ++step) {
    const double bend = s2 * phase, change = (phase - angle + std::atan(bend)) / (1 + s2 / (1 + bend * bend));
    phase = std::max(phase - change, 0.0);
    if (std::abs(change) <= 1e-15 * angle) break;
  }
  const double stretch = 1 + s2 * s2 * phase * phase;
  return {phase, -2 * s * phase / (stretch + s2)};
}

/// The maximum near `guess`, by Newton's method; NaN where it leaves the guess by more than a tenth or finds no maximum.
double climb(const Members& members, double angle, double guess) {
  double phase = guess;
  for (int step = 0; step < 30; ++step) {
    const Slopes at = slopes(members, phase, angle);
    if (!(at.second < 0)) return kNaN;
    const double change = -at.first / at.second;
    phase += change;
    if (!(std::abs(phase - guess) <= 0.1 * guess)) return kNaN;
    if (std::abs(change) <= 1e-14 * phase) return phase;
  }
  return kNaN;
}

/// Follows the maximum from a parameter near 0 to the ensemble's, in steps as long as it allows.
OfParameter follow(const Ensemble& ensemble, double angle, double phase, EnsembleWorkspace& workspace) {
  Ensemble now = ensemble;
  now.parameter = std::min(ensemble.parameter, 1e-6);
  Demand demand;
  demand.cost = kCostOfMember;
  const auto choose = [&](double parameter) {
    now.parameter = parameter;
    demand.coupling_phase = 1.5 * phase;
    return choose_members(now, demand, workspace) == Status::ok;
  };
  if (!choose(now.parameter)) return kNone;
  double reached = now.parameter, step = ensemble.parameter - reached;
  phase = climb(workspace.members, angle, phase);
  Slopes at = slopes(workspace.members, phase, angle);
  while (reached < ensemble.parameter) {
    const double next = std::min(reached + step, ensemble.parameter), rate = -at.first_by_parameter / at.second;
    const double guess = phase + rate * (next - reached);
    if (!choose(next)) return kNone;
    const double found = guess > 0.7 * phase && guess < 1.3 * phase ? climb(workspace.members, angle, guess) : kNaN;
    if (std::isfinite(found)) {
      phase = found;
      reached = next;
      step *= 2;
      at = slopes(workspace.members, phase, angle);
    } else {
      step *= 0.5;
      if (!(step > 1e-6 * reached)) return kNone;
    }
  }
  return {phase, -at.first_by_parameter / at.second};
}

double envelope_at(const Members& members, double phase) {
  double real = 0, imaginary = 0;
  for (std::size_t i = 0; i < members.size(); ++i) {
    real += members.weight[i] * std::cos(members.scale[i] * phase);
    imaginary += members.weight[i] * std::sin(members.scale[i] * phase);
  }
  return std::hypot(real, imaginary);
}

}  // namespace

double fading_phase(const Ensemble& ensemble, EnsembleWorkspace& workspace) {
  if (!valid(ensemble) || ensemble.kind == Kind::none || ensemble.kind == Kind::doppler) return kNaN;
  constexpr double kMost = 6283.0, kFaded = 0.36787944117144233;
  if (ensemble.kind == Kind::spread) {  // exp(-(s phase)^2 / 2)
    const double phase = std::sqrt(2.0) / ensemble.parameter;
    return phase < kMost ? phase : std::numeric_limits<double>::infinity();
  }
  // Couplings spread by m about x0 nearly as x0 - m y, y as exp(-y): the envelope is (1 + (m phase)^2)^(-1/2), 1/e at m phase = 2.5.
  Ensemble narrow = ensemble;
  narrow.parameter = 0;
  const double m = std::abs(mean_coupling(narrow, workspace).value - mean_coupling(ensemble, workspace).value);
  const double most = std::min(kMost, 6 / std::max(m, 1e-12));
  Demand demand;
  demand.coupling_phase = most;
  if (choose_members(ensemble, demand, workspace) != Status::ok) return kNaN;
  const auto faded = [&](double phase) { return envelope_at(workspace.members, phase) < kFaded; };
  constexpr int kSteps = 60;
  int step = 1;
  while (step <= kSteps && !faded(most * step / kSteps)) ++step;
  if (step > kSteps) return std::numeric_limits<double>::infinity();
  double low = most * (step - 1) / kSteps, high = most * step / kSteps;
  for (int i = 0; i < 24; ++i) {
    const double middle = 0.5 * (low + high);
    (faded(middle) ? high : low) = middle;
  }
  return 0.5 * (low + high);
}

OfParameter best_pulse_phase(const Ensemble& ensemble, double angle_rad, EnsembleWorkspace& workspace) {
  if (!valid(ensemble) || !(angle_rad >= 0) || !std::isfinite(angle_rad)) return kNone;
  if (ensemble.kind == Kind::none || ensemble.kind == Kind::doppler || angle_rad == 0) return {angle_rad, 0};
  if (ensemble.kind == Kind::spread) return spread_phase(ensemble.parameter, angle_rad);
  const double lowest = ensemble.kind == Kind::thermal ? lowest_coupling(ensemble, workspace) : 1;
  if (!(lowest > 0)) return kNone;
  const OfParameter found = follow(ensemble, angle_rad, angle_rad / lowest, workspace);
  return std::isfinite(found.value) && std::isfinite(found.by_parameter) ? found : kNone;
}

OfParameter mean_coupling(const Ensemble& ensemble, EnsembleWorkspace& workspace) {
  if (!valid(ensemble)) return kNone;
  if (ensemble.kind == Kind::cloud) {  // kappa/(kappa + 1)
    const CloudExponent q = cloud_exponent(ensemble);
    const double mean = 1 / (1 + q.value);
    return {mean, -q.by_parameter * mean * mean};
  }
  if (ensemble.kind == Kind::thermal) return mean_thermal_coupling(ensemble, workspace);
  return {1, 0};
}

}  // namespace halfturn::dynamics
