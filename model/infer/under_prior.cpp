// SPDX-License-Identifier: Apache-2.0
#include "model/infer/under_prior.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/line_modes.hpp"
#include "model/infer/rules.hpp"

/// One scan under one prior: starts, modes, the choice among them, its judgement and estimates.
namespace halfturn::infer {
namespace {

constexpr std::size_t kMostModes = 24, kMostFlopModes = 21;  // of a line, whose power makes fringes; of others, five of them slow
// Delta is left out of a flop where even 3 sigma of it would change the frequency by less than this part.
constexpr double kNegligibleDetuning = 1e-5;

/// The prior without a detuning too small to be felt at the frequencies found.
Prior felt(const ScanBatch& scan, const Prior& prior, std::span<const Mode> starts) {
  Prior reduced = prior;
  if (!prior.detuning) return reduced;
  // A scan of amplitudes: what Delta turns in its pulse, against the rotations of its largest amplitudes.
  const double scale = scan.kind == Axis::amplitude ? scan.pulse_length_s / *std::max_element(scan.axis.begin(), scan.axis.end()) : 1.0;
  const double most = scale * (std::abs(prior.detuning->mean) + 3.0 * prior.detuning->sigma);
  double slowest = std::numeric_limits<double>::infinity();
  for (const auto& start : starts) slowest = std::min(slowest, start.start.generalised);
  if (0.5 * most * most < kNegligibleDetuning * slowest * slowest) reduced.detuning.reset();
  return reduced;
}

/// Starts from which a likelihood with outliers finds its way: of itself it leaves alone what is further off than its odds, so that
/// a start a few sigmas beside the curve would stay where it is. The softened one pulls every point.
std::size_t settled(const Problem& problem, std::span<Mode> starts, std::size_t count, FitWorkspace& work) {
  const auto& readout = problem.readout;
  const Problem soft{problem.scan, {readout.kind, readout.observed, readout.weight, {}, kSoftness, readout.dispersion}, problem.prior, problem.options,
                     problem.sampling, problem.measured};
  const auto modes = refine_modes(soft, starts.first(count), work);
  count = 0;
  for (const auto& mode : modes) {
    const auto& best = mode.best();
    Mode& start = starts[count++];
    start = {best.physical, best.dynamics != Dynamics::undamped, 0.0};
    start.start.generalised = best.apparent;
    start.start.damping = is_simple(best.dynamics) ? envelope_of(best) : 1.0 / problem.sampling.span;
  }
  return count;
}

/// Puts the candidates of a mode in the order that they have with scatter counted; true where another is now the best.
bool rank_with_scatter(ModeSolutions& mode, double scatter) {
  const Dynamics before = mode.best().dynamics;
  std::stable_sort(mode.solutions.begin(), mode.solutions.end(),
                   [scatter](const Solution& a, const Solution& b) { return quasi_aicc(a, scatter) < quasi_aicc(b, scatter); });
  return mode.best().dynamics != before;
}

/// A scatter found from few points is uncertain itself: variance of Student's t over that of the normal law (Student, Biometrika 6, 1
/// (1908)), 1 where the readout's own noise is all there is.
double by_few_points(double scatter, double dof) { return scatter > 1.0 ? std::max(dof, 4.0) / (std::max(dof, 4.0) - 2.0) : 1.0; }

/// The candidates that a scan may tell apart. At one pulse length a leak is a smaller contrast and nothing else, to six digits, and
/// two rates are one. Ensembles are not averaged over at other amplitudes here.
DynamicsSet told_apart(const ScanBatch& scan, const DynamicsSet& asked) {
  if (scan.kind != Axis::amplitude) return asked;
  DynamicsSet set = DynamicsSet::none();
  for (const Dynamics dynamics : {Dynamics::undamped, Dynamics::dephasing, Dynamics::decay})
    if (asked.has(dynamics)) set.add(dynamics);
  if (set.empty()) set.add(Dynamics::undamped);
  return set;
}

}  // namespace

Prior felt_prior(const Fit& fit) {
  Prior prior = fit.prior;
  if (!fit.detuning_felt) prior.detuning.reset();
  return prior;
}

bool fit_under(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  std::array<Mode, kMostModes> starts;
  const auto find = scan.kind == Axis::duration ? duration_starts : scan.kind == Axis::detuning ? line_starts : amplitude_starts;
  const std::span<Mode> room{starts.data(), scan.kind == Axis::detuning ? kMostModes : kMostFlopModes};
  std::size_t count = find(scan, readout, prior, fit.sampling, room, work.search);
  Prior known = felt(scan, prior, {starts.data(), count});
  known.candidates = told_apart(scan, prior.candidates);
  FitQuality before;
  before.points = fit.quality.points;
  before.readout_released = fit.quality.readout_released;
  before.dead_time_released = fit.quality.dead_time_released;
  before.dead_time_doubted = fit.quality.dead_time_doubted;
  fit.detuning_felt = known.detuning.has_value();
  const Problem problem{scan, readout, known, options, fit.sampling, before.points};
  if (!readout.odds.empty()) count = settled(problem, starts, count, work);
  auto modes = refine_modes(problem, {starts.data(), count}, work);
  fit.pulse_length_s.clear();
  fit.pulse_amplitude.clear();
  fit.second = {};
  fit.quality = before;
  fit.outcome = FitOutcome::not_converged;
  if (modes.empty()) return false;

  const FitQuality of_best = judge(problem, modes.front().best(), work);
  // What of the scatter the likelihood has not counted yet.
  const auto uncounted = [&readout](double scatter) { return scatter / readout.dispersion; };
  FitQuality of_choice = of_best;
  of_choice.scatter = uncounted(of_best.scatter);
  const std::size_t chosen = choose_mode(problem, modes, of_choice, work);
  fit.quality = chosen == 0 ? of_best : judge(problem, modes[chosen].best(), work);
  if (rank_with_scatter(modes[chosen], uncounted(fit.quality.scatter))) fit.quality = judge(problem, modes[chosen].best(), work);
  fit.quality.readout_released = before.readout_released;
  fit.quality.dead_time_released = before.dead_time_released;
  fit.quality.dead_time_doubted = before.dead_time_doubted;
  fit.quality.outside_expect = of_choice.outside_expect;
  fit.quality.by_history = of_choice.by_history;
  fit.quality.rival = of_choice.rival;
  const double scatter = fit.quality.scatter;
  fit.dispersion = readout.dispersion;
  fit.quality.scatter = uncounted(scatter) * by_few_points(scatter, fit.quality.dof);
  estimate(problem, modes[chosen], fit, work);
  if (scan.kind == Axis::detuning) widen_offset(problem, modes, chosen, fit);
  estimate_second(problem, modes, chosen, fit, work);
  fit.quality.scatter = scatter;
  fit.outcome = FitOutcome::fitted;
  return true;
}

}  // namespace halfturn::infer
