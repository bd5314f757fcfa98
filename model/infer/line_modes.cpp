// SPDX-License-Identifier: Apache-2.0
#include "model/infer/line_modes.hpp"

#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>

#include "model/infer/monotone.hpp"
#include "model/infer/statistics.hpp"

namespace halfturn::infer {
namespace {

constexpr double kOneLine = 0.1;       // of the width; half of it is the error that a carrier may have
constexpr double kAreaSigma = 0.3, kAreaMost = 10.0;
constexpr double kHopeless = 20.0;     // deviance above the rival margin
constexpr double kOtherCandidate = 0.1;  // of the best mode's gain, which another candidate may take off another mode
constexpr double kBarren = 10.0;       // deviance within which modes are compared in a scan that shows no line
constexpr double kWeighed = 20.0;      // deviance above the best beyond which a mode weighs nothing

/// What scatter the best mode leaves, roughly: deviances are divided by it before they are compared.
double rough_scatter(const Problem& problem, const Solution& best) {
  const double dof = problem.measured - best.parameters;
  return dof > 0.0 ? std::max(1.0, 2.0 * best.minimum.value / dof) : 1.0;
}

/// Standard error of the offset by the information at the mode, scatter not counted; NaN where there is none.
double offset_sigma(const Problem& problem, const Solution& solution, ObjectiveWorkspace& work) {
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, solution.dynamics, {}, solution.negative_contrast,
                                work);
  const auto slot = objective.layout().line_offset;
  const Matrix& information = solution.minimum.information;
  Vector scale = information.diagonal().cwiseMax(1e-300).cwiseSqrt().cwiseInverse();
  for (Eigen::Index i = 0; i < scale.size(); ++i)
    if (solution.minimum.at_bound[static_cast<std::size_t>(i)] != 0 && i != slot) scale[i] = 0.0;
  Matrix scaled = scale.asDiagonal() * information * scale.asDiagonal();
  for (Eigen::Index i = 0; i < scale.size(); ++i)
    if (scale[i] == 0.0) scaled(i, i) = 1.0;
  const Eigen::LLT<Matrix> factors(scaled);
  if (factors.info() != Eigen::Success) return kUnknown;
  Vector unit = Vector::Zero(scale.size());
  unit[slot] = scale[slot];
  const double variance = unit.dot(Vector(factors.solve(unit)));
  return variance > 0.0 ? std::sqrt(variance) : kUnknown;
}

}  // namespace

double drop_hopeless(const Problem& problem, std::vector<ModeSolutions>& modes, double sorted_by) {
  const Solution& best = modes.front().best();
  const double scatter = rough_scatter(problem, best);
  const double gained = 2.0 * (monotone_half_deviance(problem.readout, problem.scan.axis).flat - best.minimum.value) / scatter;
  const bool shown = gained >= problem.options.least_evidence - kBarren;
  const double above = shown ? problem.options.rival_margin + kHopeless + kOtherCandidate * gained : kBarren;
  const double worth_it = best.minimum.value + 0.5 * scatter * above;
  const double most = worth_it + 1.5 * std::max(0.0, sorted_by - best.minimum.value);
  const auto hopeless = [most](const ModeSolutions& mode) { return mode.best().minimum.value > most; };
  // The next best is kept in any case, to be said.
  const auto from = modes.begin() + std::min<std::ptrdiff_t>(2, static_cast<std::ptrdiff_t>(modes.size()));
  modes.erase(std::remove_if(from, modes.end(), hopeless), modes.end());
  return worth_it;
}

bool one_line(const Solution& a, const Solution& b, double line_width) {
  return std::abs(a.physical.line_offset - b.physical.line_offset) < kOneLine * line_width;
}

double held_by_area(const Problem& problem, const Solution& solution) {
  if (!problem.prior.rough_log_rabi || problem.prior.log_rabi) return 0.0;
  const double z = (std::log(solution.physical.generalised) - *problem.prior.rough_log_rabi) / kAreaSigma;
  return std::min(z * z, kAreaMost);
}

void widen_offset(const Problem& problem, std::span<const ModeSolutions> modes, std::size_t chosen, Fit& fit) {
  Estimate& offset = fit.line_offset;
  if (!std::isfinite(offset.sigma)) return;
  const Solution& best = modes[chosen].best();
  const double scatter = fit.quality.scatter, z = normal_quantile(0.5 + 0.5 * problem.options.level);
  double total = 1.0, first = offset.value, second = offset.value * offset.value + offset.sigma * offset.sigma;
  ObjectiveWorkspace work;
  work.reserve(problem.scan.points());
  for (std::size_t i = 0; i < modes.size(); ++i) {
    const Solution& other = modes[i].best();
    const double above = std::max(0.0, (other.aicc - best.aicc) / scatter), reach = z * z - above;
    const bool same = one_line(other, best, fit.quality.line_width) && above < kWeighed;
    if (i == chosen || !(same || reach > 0.0)) continue;
    const double sigma = offset_sigma(problem, other, work) * std::sqrt(scatter), at = other.physical.line_offset;
    if (!std::isfinite(sigma)) continue;
    if (reach > 0.0) {
      offset.low = std::min(offset.low, at - std::sqrt(reach) * sigma);
      offset.high = std::max(offset.high, at + std::sqrt(reach) * sigma);
    }
    if (!same) continue;
    const double weight = std::exp(-0.5 * above);
    total += weight;
    first += weight * at;
    second += weight * (at * at + sigma * sigma);
  }
  if (total == 1.0) return;
  offset.value = first / total;
  offset.sigma = std::sqrt(std::max(offset.sigma * offset.sigma / total, second / total - offset.value * offset.value));
}

}  // namespace halfturn::infer
