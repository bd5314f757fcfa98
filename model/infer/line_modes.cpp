// SPDX-License-Identifier: Apache-2.0
#include "model/infer/line_modes.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/monotone.hpp"

namespace halfturn::infer {
namespace {

constexpr double kOneLine = 0.25;      // of the width
constexpr double kAreaSigma = 0.3, kAreaMost = 10.0;
constexpr double kHopeless = 20.0;     // deviance above the rival margin
constexpr double kOtherCandidate = 0.1;  // of the best mode's gain, which another candidate may take off another mode
constexpr double kBarren = 10.0;       // deviance within which modes are compared in a scan that shows no line

/// What scatter the best mode leaves, roughly: deviances are divided by it before they are compared.
double rough_scatter(const Problem& problem, const Solution& best) {
  const double dof = problem.measured - best.parameters;
  return dof > 0.0 ? std::max(1.0, 2.0 * best.minimum.value / dof) : 1.0;
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

}  // namespace halfturn::infer
