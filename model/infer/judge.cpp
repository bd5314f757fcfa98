// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <array>
#include <cmath>
#include <numeric>

#include <Eigen/Cholesky>

#include "model/infer/goodness.hpp"
#include "model/infer/monotone.hpp"
#include "model/infer/outliers.hpp"
#include "model/infer/scatter.hpp"
#include "model/infer/solution.hpp"
#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

// A deviance as improbable as the first of these under the readout's own noise begins to count as excess scatter, which widens
// every error; at the second it counts in full.
constexpr double kScatterBegins = 0.1, kScatterFull = 0.01;

double standard_variance(const Readout& readout, std::size_t i, double mean) {
  const double n = readout.weight[i];
  if (readout.kind == Readout::Kind::gaussian) return n * n;
  if (readout.kind == Readout::Kind::poisson) return std::max(mean, 1e-300) / n;
  return std::max(mean * (1.0 - mean), 1e-12) / n;
}

/// How many of the parameters the scan's points determine, the rest being held by priors and references.
double effective_parameters(const ScanObjective& objective, const Minimum& minimum) {
  Matrix data;
  if (!objective.data_information(minimum.x, data)) return static_cast<double>(minimum.x.size());
  const Eigen::LDLT<Matrix> whole(minimum.information);
  if (whole.info() != Eigen::Success) return static_cast<double>(minimum.x.size());
  const Matrix share = whole.solve(data);
  return std::clamp(share.trace(), 0.0, static_cast<double>(minimum.x.size()));
}

/// p-value of the strongest oscillation that is left in the residuals, at any frequency that the points can tell: half the deviance
/// it gains is exponential by chance, with about two independent trials a point. It finds a second component, a harmonic, fringes.
double left_over_p_value(const Problem& problem, std::span<const double> signal, double scatter, FitWorkspace& work) {
  const auto n = problem.scan.points();
  work.search.reserve(n);
  for (std::size_t i = 0; i < n; ++i) {
    const bool counts = measured(problem.readout, i);
    work.search.value[i] = counts ? reading(problem.readout, i) - signal[i] : 0.0;
    work.search.weight[i] = counts ? 1.0 / (standard_variance(problem.readout, i, signal[i]) * scatter) : 0.0;
  }
  const LinearPoints points{problem.scan.axis, {work.search.value.data(), n}, {work.search.weight.data(), n}, problem.scan.axis[0]};
  const double span = problem.sampling.span, distinct = problem.sampling.distinct;
  const TrialGrid grid{constants::kTwoPi * 0.5 / span, constants::kTwoPi * 0.3 / span, static_cast<int>(std::min(2000.0, distinct / 0.6))};
  const double none = 0.0;
  search_frequencies(points, grid, {&none, 1}, work.search.frequencies);
  const auto& gain = work.search.frequencies.gain;
  const double most = *std::max_element(gain.begin(), gain.end());
  return std::min(1.0, 2.0 * distinct * std::exp(-0.5 * most));
}

/// Smallest p-value, of four looks at the residuals in the axis's order and in units of their errors with scatter counted: too few
/// runs of a sign, neighbours alike, the largest one, an oscillation left in them (Bonferroni over all, and over the points).
double residual_p_value(const Problem& problem, std::span<const double> signal, double scatter, FitWorkspace& work) {
  auto& order = work.order;
  const auto& axis = problem.scan.axis;
  std::vector<std::size_t> index;
  for (std::size_t i = 0; i < axis.size(); ++i)
    if (measured(problem.readout, i)) index.push_back(i);
  std::stable_sort(index.begin(), index.end(), [&](std::size_t a, std::size_t b) { return axis[a] < axis[b]; });
  order.clear();
  for (const auto i : index) {
    const double sigma = std::sqrt(standard_variance(problem.readout, i, signal[i]) * scatter);
    order.push_back((reading(problem.readout, i) - signal[i]) / sigma);
  }
  const double runs = runs_p_value(order);
  const double z = autocorrelation_z(order);
  const double neighbours = std::isfinite(z) ? normal_cdf(-z) : 1.0;
  // What scatters has longer tails than the normal law, the longer the nearer to an edge. Looked at only where scatter was seen.
  const double outlier = scatter > 1.0 ? furthest_p_value(problem.readout, signal, scatter) : 1.0;
  // The search costs as much as all else here; a fit that is good enough as it is needs none.
  const double left_over = scatter > 1.0 ? left_over_p_value(problem, signal, scatter, work) : 1.0;
  return std::min(1.0, 4.0 * std::min({runs, neighbours, outlier, left_over}));
}

/// Deviances gained over a flat line and over the best monotone curve, scatter counted; with outliers allowed for in all of them where the
/// readout allows for them.
void gather_evidence(const Problem& problem, const Kept& kept, std::span<const double> signal, FitQuality& quality) {
  Readout readout = problem.readout;
  readout.dispersion = quality.scatter;
  const bool robust = !readout.odds.empty();
  const auto monotone = robust ? contaminated_monotone(readout, problem.scan.axis, kept) : monotone_half_deviance(readout, problem.scan.axis);
  double half_deviance = 0.0;
  evaluate(readout, signal, half_deviance, {}, {});
  quality.over_flat = 2.0 * (monotone.flat - half_deviance);
  quality.over_monotone = 2.0 * (std::min(monotone.rising, monotone.falling) - half_deviance);
}

}  // namespace

FitQuality judge(const Problem& problem, const Solution& solution, FitWorkspace& work) {
  FitQuality quality;
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, solution.dynamics, {}, solution.negative_contrast,
                                work.objective);
  const auto n = problem.scan.points();
  work.signal.resize(n);
  double half_deviance = kUnknown;
  if (!objective.data_part(solution.physical, half_deviance, work.signal)) return quality;
  const double parameters = effective_parameters(objective, solution.minimum);
  // What is told of the residuals is told of the points that are trusted, by the readout's own noise.
  const Kept kept = set_aside(problem.readout, work.signal);
  const Problem trusted{problem.scan, kept.readout(problem.readout), problem.prior, problem.options, problem.sampling,
                        problem.measured - static_cast<int>(kept.distrusted.size())};
  const auto goodness_of_fit = goodness(trusted.readout, work.signal, static_cast<int>(std::lround(parameters)));
  quality.distrusted = kept.distrusted;
  quality.p_together = together_p_value(problem.readout, problem.scan.axis, kept.distrusted);
  for (const int i : kept.distrusted) quality.distrusted_at.push_back(problem.scan.axis[static_cast<std::size_t>(i)]);
  quality.points = problem.measured;
  quality.deviance = goodness_of_fit.deviance;
  quality.dof = trusted.measured - parameters;
  quality.p_value = goodness_of_fit.p_value;
  if (quality.p_value < kScatterBegins && goodness_of_fit.expected > 0.0) {
    const double counted = std::clamp((kScatterBegins - quality.p_value) / (kScatterBegins - kScatterFull), 0.0, 1.0);
    quality.scatter = 1.0 + counted * std::max(0.0, goodness_of_fit.deviance / goodness_of_fit.expected - 1.0);
  }
  quality.p_after_scatter = residual_p_value(trusted, work.signal, quality.scatter, work);

  gather_evidence(problem, kept, work.signal, quality);

  if (problem.scan.kind == Axis::detuning) {
    const double length = problem.scan.pulse_length_s - solution.physical.dead_time;
    quality.line_width = line_width(objective.rates(solution.physical), objective.ensemble(solution.physical), problem.prior.start, length,
                                    work.objective.ensemble);
    return quality;
  }
  quality.range_low = constants::kTwoPi * 0.1 / problem.sampling.span;
  const TrialGrid searched = trial_grid(problem.prior, problem.sampling, problem.scan.points());
  quality.range_high = std::min(problem.sampling.limit, searched.at(searched.count - 1));
  if (problem.prior.expect) {
    quality.range_low = problem.prior.expect->low;
    quality.range_high = std::min(problem.prior.expect->high, searched.at(searched.count - 1));
  }
  return quality;
}

double line_width(const dynamics::Rates& rates, const dynamics::Ensemble& ensemble, const dynamics::Start& start, double length_s,
                  dynamics::EnsembleWorkspace& work) {
  dynamics::Rates centred = rates;
  centred.detuning = 0.0;
  const double unmoved = dynamics::population({}, start, 0.0);
  const double breadth = ensemble.kind == dynamics::Ensemble::Kind::doppler ? ensemble.parameter : 0.0;
  // Beyond this the wings of any of the broadenings are below half.
  const double far = 4.0 * (rates.rabi + rates.decay + rates.loss + rates.dephasing + breadth) + 4.0 * constants::kPi / length_s;
  constexpr int kSteps = 400;
  std::array<double, kSteps + 1> moved, at;
  for (int i = 0; i <= kSteps; ++i) at[static_cast<std::size_t>(i)] = far * i / kSteps;
  dynamics::Derivatives out;
  out.population = moved;
  dynamics::Status status = dynamics::Status::ok;
  dynamics::ensemble_detuning_scan(centred, ensemble, start, at, length_s, out, {}, status, work);
  if (status != dynamics::Status::ok) return kUnknown;
  for (double& m : moved) m = std::abs(m - unmoved);
  const double half = 0.5 * *std::max_element(moved.begin(), moved.end());
  if (!(half > 0.0)) return kUnknown;
  std::size_t outside = kSteps;
  while (outside > 0 && moved[outside - 1] < half) --outside;
  if (outside == 0) return kUnknown;
  // Between two of 400 steps the flank is straight to a thousandth of the width.
  const double part = (moved[outside - 1] - half) / std::max(moved[outside - 1] - moved[outside], 1e-300);
  return 2.0 * (at[outside - 1] + std::clamp(part, 0.0, 1.0) * (at[outside] - at[outside - 1]));
}

}  // namespace halfturn::infer
