// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/members.hpp"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "model/dynamics/motion.hpp"
#include "model/dynamics/quadrature.hpp"

namespace halfturn::dynamics::detail {
namespace {

// The trapezoidal rule on a Gaussian: what is cut off beyond kReach has a weight of 2e-11; with the step 2 pi/(a + kMargin)
// the aliases of cos(a h) have at most 2 exp(-kMargin^2/2) = 5e-11.
constexpr double kReach = 6.7, kMargin = 7.0;
// Cloud: what is left out beyond y = kCloudReach has a weight of 7e-13.
constexpr double kCloudReach = 28.0;
// The density of z = exp(-y/power) is power z^(power-1), whose singularity at 0 limits Gauss and Legendre to an error of order
// points^(-2 power). With at least 3, 4, 6, 8, errors of 2e-11 took 40, 16, 16, 20 points for sigma/w = 0.4 and a phase of 10,
// and 44, 52, 60, 68 for sigma/w = 1 and a phase of 30.
constexpr double kLeastPower = 4.0;

void gaussian(double sigma, double phase, bool halved, std::vector<double>& value, std::vector<double>& by_value,
              double center, Members& members) {
  const NormalRule rule = normal_rule(phase);
  const double step = 2 * std::numbers::pi / (phase + kMargin);
  const std::size_t side = rule.count > 0 ? rule.count : static_cast<std::size_t>(std::ceil(kReach / step));
  const bool middle = rule.count == 0;
  members.resize((halved ? side : 2 * side) + (middle ? 1 : 0));
  std::size_t at = 0;
  double sum = 0;
  const auto add = [&](double h, double weight) {
    value[at] = center + sigma * h;
    by_value[at] = h;
    members.weight[at++] = weight;
    sum += weight;
  };
  if (middle) add(0, 1);
  for (std::size_t i = 0; i < side; ++i) {
    const double h = middle ? static_cast<double>(i + 1) * step : rule.node[i];
    const double weight = middle ? std::exp(-0.5 * h * h) : rule.weight[i];
    add(h, halved ? 2 * weight : weight);
    if (!halved) add(-h, weight);
  }
  for (double& weight : members.weight) weight /= sum;
}

std::size_t gaussian_size(double phase) {
  return static_cast<std::size_t>(2 * std::ceil(kReach * (phase + kMargin) / (2 * std::numbers::pi))) + 1;
}

/// Points that keep errors below 2e-11 of cos(phase x) and 1e-10 of its derivative by the exponent: fitted to the least numbers
/// found for sigma/w = 0.001 to 3 and phases from 0.1 to 300 (ensemble_test checks them against dense sums).
std::size_t cloud_size(double phase, double power_ratio, double width) {
  const double root = std::sqrt(power_ratio), points = 16 + 0.32 * root * width * phase + 6 * (root - 1);
  return static_cast<std::size_t>(8 * std::ceil(std::min(points, 1e6) / 8));  // eights: the rule is kept between calls
}

Status cloud(const Ensemble& ensemble, double phase, EnsembleWorkspace& workspace) {
  const CloudExponent q = cloud_exponent(ensemble);
  const double inverse = std::min(q.value, 1 / kLeastPower), reach = -std::expm1(-kCloudReach * inverse);
  const std::size_t points = cloud_size(phase, std::max(1.0, q.value * kLeastPower), reach);
  if (points > kMostMembers) return Status::too_many_members;
  LegendreRule& rule = workspace.legendre[points % 8 == 0 && points / 8 < workspace.legendre.size() ? points / 8 : 0];
  legendre_rule(points, rule);
  Members& members = workspace.members;
  members.resize(points);
  const double span = inverse > 0 ? reach / inverse : kCloudReach;
  double sum = 0;
  for (std::size_t i = 0; i < points; ++i) {
    const double s = span * rule.node[i], z = 1 - inverse * s;
    const double y = inverse > 0 ? -std::log1p(-inverse * s) / inverse : s;
    members.scale[i] = std::exp(-q.value * y);
    members.by_scale[i] = -y * members.scale[i] * q.by_parameter;
    members.weight[i] = rule.weight[i] * std::exp(-y) / z;
    sum += members.weight[i];
  }
  for (double& weight : members.weight) weight /= sum;
  return Status::ok;
}

}  // namespace

void Members::resize(std::size_t count) {
  for (auto* row : {&scale, &shift, &weight, &by_scale, &by_shift, &by_weight}) row->assign(count, 0.0);
}

CloudExponent cloud_exponent(const Ensemble& ensemble) {
  const double factor = ensemble.follows_intensity ? 4 : 2;
  return {factor * ensemble.parameter * ensemble.parameter, 2 * factor * ensemble.parameter};
}

bool valid(const Ensemble& ensemble) {
  using Kind = Ensemble::Kind;
  if (ensemble.kind == Kind::none) return true;
  if (!(ensemble.parameter >= 0) || !std::isfinite(ensemble.parameter * ensemble.parameter)) return false;
  if (ensemble.kind != Kind::thermal) return true;
  for (const Mode& mode : ensemble.modes) {
    const bool good = mode.lamb_dicke >= 0 && std::isfinite(mode.lamb_dicke * mode.lamb_dicke) && std::abs(mode.sideband) <= 20 &&
                      mode.phonon_ratio >= 0 && std::isfinite(mode.phonon_ratio);
    if (!good) return false;
  }
  return !ensemble.modes.empty();
}

Status choose_members(const Ensemble& ensemble, const Demand& demand, EnsembleWorkspace& workspace) {
  using Kind = Ensemble::Kind;
  if (!std::isfinite(demand.coupling_phase) || !std::isfinite(demand.longest_s)) return Status::not_finite;
  if (ensemble.kind == Kind::thermal) return thermal_members(ensemble, demand, workspace);
  if (ensemble.kind == Kind::cloud) return cloud(ensemble, demand.coupling_phase, workspace);
  const bool spread = ensemble.kind == Kind::spread;
  const double phase = ensemble.parameter * (spread ? demand.coupling_phase : demand.longest_s);
  if (!(phase < static_cast<double>(kMostMembers)) || gaussian_size(phase) > kMostMembers) return Status::too_many_members;
  Members& members = workspace.members;
  if (spread) {
    gaussian(ensemble.parameter, phase, false, members.scale, members.by_scale, 1, members);
  } else {
    gaussian(ensemble.parameter, phase, demand.halved, members.shift, members.by_shift, 0, members);
    std::fill(members.scale.begin(), members.scale.end(), 1.0);
  }
  return Status::ok;
}

}  // namespace halfturn::dynamics::detail
