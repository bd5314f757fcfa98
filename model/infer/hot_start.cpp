// SPDX-License-Identifier: Apache-2.0
#include "model/infer/hot_start.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/rules.hpp"

namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// An oscillation that fades to 1/e within so many of its cycles may be that of a hot state; a relative spread of a tenth leaves 2.3.
constexpr double kFewCycles = 3.0;
// Mean phonons times eta^2 that are tried: couplings spread by as much, and beyond 1 many are turned round.
constexpr double kHeats[] = {0.4, 1.0, 2.0, 4.0};
// Trial frequencies stand a fifth of a resolution element apart, or this part of themselves, where a fading flop is no sharper.
constexpr double kCoarse = 0.06;
constexpr double kMostPhase = 40.0 * kTwoPi;  // of the table of populations, and its step, rad: a line between its entries is off by 2e-3
constexpr double kPhaseStep = 0.25;

/// The population that a thermal state shows after every phase Omega t of a table.
struct Table {
  std::vector<double> phase, population;

  bool fill(const Problem& problem, double phonons, double most, FitWorkspace& work) {
    phase.resize(static_cast<std::size_t>(std::ceil(most / kPhaseStep)) + 2);
    population.resize(phase.size());
    for (std::size_t i = 0; i < phase.size(); ++i) phase[i] = kPhaseStep * static_cast<double>(i);
    dynamics::Ensemble ensemble;
    ensemble.kind = dynamics::Ensemble::Kind::thermal;
    ensemble.parameter = phonons;
    ensemble.modes = problem.prior.motion;
    dynamics::Rates rates;
    rates.rabi = 1.0;
    dynamics::Derivatives out;
    out.population = population;
    dynamics::Status status = dynamics::Status::ok;
    dynamics::ensemble_duration_scan(rates, ensemble, problem.prior.start, phase, 0.0, out, {}, status, work.objective.ensemble);
    return status == dynamics::Status::ok;
  }

  double at(double wanted) const {
    const double place = std::max(0.0, wanted) / kPhaseStep;
    const auto below = std::min(static_cast<std::size_t>(place), phase.size() - 2);
    const double part = std::min(1.0, place - static_cast<double>(below));
    return population[below] + part * (population[below + 1] - population[below]);
  }
};

struct Trial {
  double gain = 0.0, frequency = 0.0, phonons = 0.0;
  StraightLine signals;
};

/// The best frequency under one table, the two signals solved for.
Trial best_of(const Problem& problem, const Table& table, double phonons, const SearchWorkspace& search) {
  const TrialGrid grid = trial_grid(problem.prior, problem.sampling, problem.scan.points());
  const double dead = problem.prior.dead_time.mean, longest = *std::max_element(problem.scan.axis.begin(), problem.scan.axis.end()) - dead;
  const double most = std::min(grid.at(grid.count - 1), kMostPhase / longest);
  Trial best;
  for (double w = grid.bottom; w <= most; w += std::max(grid.step, kCoarse * w)) {
    StraightLine signals;
    for (std::size_t i = 0; i < problem.scan.points(); ++i)
      signals.add(search.weight[i], search.value[i], table.at(w * (problem.scan.axis[i] - dead)));
    if (signals.gain() > best.gain && sign_admitted(problem.prior, signals.slope())) best = {signals.gain(), w, phonons, signals};
  }
  return best;
}

/// The sum of the squares of the modes' eta, each with its share of the phonons.
double heat_of_phonon(const Prior& prior) {
  double sum = 0.0;
  for (const auto& mode : prior.motion) sum += mode.lamb_dicke * mode.lamb_dicke * mode.phonon_ratio;
  return sum;
}

Physical started(const Problem& problem, const Trial& trial) {
  Physical start;
  start.generalised = trial.frequency;
  start.dead_time = problem.prior.dead_time.mean;
  start.breadth = trial.phonons;
  start.signal_ground = trial.signals.intercept();
  start.signal_excited = start.signal_ground + trial.signals.slope();
  keep_signals_possible(problem.scan.readout, start);
  return start;
}

bool fades_fast(const ModeSolutions& mode) {
  return std::any_of(mode.solutions.begin(), mode.solutions.end(), [](const Solution& s) {
    return envelope_of(s) * kTwoPi * kFewCycles > s.apparent;
  });
}

bool may_be_hot(const Problem& problem, double flat, std::span<const ModeSolutions> modes) {
  const auto& prior = problem.prior;
  if (problem.scan.kind != Axis::duration || !prior.candidates.has(Dynamics::thermal) || !(heat_of_phonon(prior) > 0.0)) return false;
  if (modes.empty()) return true;
  const auto& best = modes.front();
  return fades_fast(best) && 2.0 * (flat - best.best().minimum.value) >= kShown;
}

}  // namespace

std::vector<Physical> hot_starts(const Problem& problem, double flat, std::span<const ModeSolutions> modes, FitWorkspace& work) {
  std::vector<Physical> starts;
  if (!may_be_hot(problem, flat, modes) || !take_points(problem.readout, problem.sampling, work.search)) return starts;
  const double longest = *std::max_element(problem.scan.axis.begin(), problem.scan.axis.end());
  const double most = std::min(kMostPhase, 1.25 * longest * problem.sampling.limit);
  std::vector<Trial> trials;
  Table table;
  for (const double heat : kHeats)
    if (const double phonons = heat / heat_of_phonon(problem.prior); table.fill(problem, phonons, most, work))
      trials.push_back(best_of(problem, table, phonons, work.search));
  std::sort(trials.begin(), trials.end(), [](const Trial& a, const Trial& b) { return a.gain > b.gain; });
  for (const Trial& trial : trials)
    if (trial.gain > 0.0 && starts.size() < 2) starts.push_back(started(problem, trial));
  return starts;
}

}  // namespace halfturn::infer
