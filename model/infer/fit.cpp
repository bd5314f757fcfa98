// SPDX-License-Identifier: Apache-2.0
#include "model/infer/fit.hpp"

#include <algorithm>
#include <cmath>

#include <Eigen/Cholesky>

#include "model/infer/line_modes.hpp"
#include "model/infer/monotone.hpp"
#include "model/infer/shown.hpp"
#include "model/infer/solution.hpp"

namespace halfturn::infer {
namespace {

double square(double x) { return x * x; }

constexpr std::size_t kMostModes = 16;
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

// A drift of the coupling along the scan is looked for where its score test exceeds this (a scan without one does in 0.5 % of cases),
// held loosely by this sigma, and kept where it lowers the AICc by more than its own cost.
constexpr double kDriftSuspected = 8.0;
constexpr double kDriftSigma = 0.05;

/// Twice the gain in the log likelihood that a drift promises at the fit, the other parameters following (C. R. Rao, Proc. Camb. Phil.
/// Soc. 44, 50 (1948)): chi-square with one degree of freedom where there is none.
double drift_score(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Fit& fit, FitWorkspace& work) {
  Prior with = prior;
  with.drift = Known{0.0, kDriftSigma};
  ScanObjective objective(scan, readout, with, fit.chosen, {}, fit.negative_contrast, work.objective);
  if (objective.layout().count != fit.x.size() + 1) {  // Delta was too small to be felt
    with.detuning.reset();
    if (ScanObjective(scan, readout, with, fit.chosen, {}, fit.negative_contrast, work.objective).layout().count != fit.x.size() + 1) return 0.0;
  }
  const ScanObjective drifting(scan, readout, with, fit.chosen, {}, fit.negative_contrast, work.objective);
  double value = 0.0;
  Vector gradient;
  Matrix information;
  if (!drifting.evaluate(drifting.pack(fit.physical), value, &gradient, &information)) return 0.0;
  const int slot = drifting.layout().drift;
  const Eigen::LDLT<Matrix> factors(information);
  if (factors.info() != Eigen::Success || !factors.isPositive()) return 0.0;
  const Vector direction = factors.solve(Vector(Vector::Unit(gradient.size(), slot)));
  return square(gradient.dot(direction)) / std::max(direction[slot], 1e-300) / fit.quality.scatter;
}

// A prior contradicted by more than so many of its own sigmas is not believed against the data.
constexpr double kContradicted = 3.0;
// ... and is then held this much more loosely, or not at all (readout).
constexpr double kLoosened = 10.0;
// The points' part of the information about the dead time that lets them contradict its prior. Below, the prior's wide tail, which
// takes a hundredth from its curvature, would decide (campaign, "decay").
constexpr double kPointsHeard = 0.1;
// Deviance by which a fit without history's frequency must be better to be taken.
constexpr double kClearlyBetter = 10.0;
// Deviance gained over a flat line that a fit must show for what it says of the readout to count.
constexpr double kEvidence = 30.0;

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

/// What the scan shows under one prior; false where nothing could be fitted.
bool fit_under(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  std::array<Mode, kMostModes> starts;
  const auto find = scan.kind == Axis::duration ? duration_starts : scan.kind == Axis::detuning ? line_starts : amplitude_starts;
  const std::size_t count = find(scan, readout, prior, fit.sampling, starts, work.search);
  Prior known = felt(scan, prior, {starts.data(), count});
  known.candidates = told_apart(scan, prior.candidates);
  const int points = fit.quality.points;
  const Problem problem{scan, readout, known, options, fit.sampling, points};
  const auto modes = refine_modes(problem, {starts.data(), count}, work);
  fit.pulse_length_s.clear();
  fit.pulse_amplitude.clear();
  fit.second = {};
  fit.quality = FitQuality{};
  fit.quality.points = points;
  fit.outcome = FitOutcome::not_converged;
  if (modes.empty()) return false;

  const FitQuality of_best = judge(problem, modes.front().best(), work);
  FitQuality of_choice = of_best;
  const std::size_t chosen = choose_mode(problem, modes, of_choice, work);
  fit.quality = chosen == 0 ? of_choice : judge(problem, modes[chosen].best(), work);
  fit.quality.outside_expect = of_choice.outside_expect;
  fit.quality.by_history = of_choice.by_history;
  fit.quality.rival = of_choice.rival;
  estimate(problem, modes[chosen], fit, work);
  if (scan.kind == Axis::detuning) widen_offset(problem, modes, chosen, fit);
  estimate_second(problem, modes, chosen, fit, work);
  fit.outcome = FitOutcome::fitted;
  return true;
}

bool contradicts(const std::optional<Known>& known, const Estimate& found) {
  return known && std::abs(found.value - known->mean) > kContradicted * std::max(known->sigma, 1e-6);
}

/// Whether the fit is believable but for what the readout's prior held against it: no oscillation under it, or one with signals
/// far from it.
bool readout_contradicted(const Prior& prior, const Fit& fit) {
  if (!prior.floor && !prior.contrast) return false;
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.over_flat >= kEvidence)) return true;
  return contradicts(prior.contrast, fit.contrast) || contradicts(prior.floor, fit.floor);
}

/// Whether the dead time that the points alone ask for lies far from its prior, by both their errors: with the fit z prior sigmas
/// away and its variance a part r of the prior's, that distance is z / sqrt(1 - r).
bool dead_time_contradicted(const ScanBatch& scan, const Prior& prior, const Fit& fit) {
  const double sigma = prior.dead_time.sigma;
  if (fit.outcome != FitOutcome::fitted || scan.kind != Axis::duration || !(sigma > 0.0)) return false;
  const double z = (fit.physical.dead_time - prior.dead_time.mean) / sigma;
  const double share = fit.dead_time_s.sigma * fit.dead_time_s.sigma / (fit.quality.scatter * sigma * sigma);
  // Where the prior holds nine tenths of what is known, the points have no say of their own.
  const bool told = 1.0 - share > kPointsHeard;
  return std::abs(z) > kContradicted || (told && z * z > kContradicted * kContradicted * (1.0 - share));
}

/// Whether a line scan is badly described with the Rabi frequency that history knows: it may have been taken at another power that
/// nobody stated.
bool history_contradicted(const ScanBatch& scan, const Prior& prior, const Fit& fit) {
  if (scan.kind != Axis::detuning || !prior.log_rabi) return false;
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.over_flat >= kEvidence) || fit.quality.p_value < 0.01) return true;
  return std::abs(std::log(fit.rabi_mean.value) - prior.log_rabi->mean) > kContradicted * std::max(prior.log_rabi->sigma, 1e-6);
}

/// The prior with what the scan contradicts set aside; the same where it contradicts nothing.
Prior reconciled(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  Prior loose = prior;
  if (readout_contradicted(prior, fit)) {
    loose.floor.reset();
    loose.contrast.reset();
    Fit freed = fit;
    // A scan that shows nothing with the readout free shows nothing.
    if (fit_under(scan, readout, loose, options, freed, work) && freed.quality.over_flat >= kEvidence) {
      fit = std::move(freed);
      fit.quality.readout_released = true;
    } else {
      loose = prior;
    }
  }
  if (history_contradicted(scan, prior, fit)) {
    loose.log_rabi.reset();
    Fit freed = fit;
    const double under = fit.outcome == FitOutcome::fitted ? fit.quality.deviance : std::numeric_limits<double>::infinity();
    if (fit_under(scan, readout, loose, options, freed, work) && freed.quality.over_flat >= kEvidence && freed.quality.deviance < under - kClearlyBetter)
      fit = std::move(freed);
    else
      loose.log_rabi = prior.log_rabi;
  }
  if (dead_time_contradicted(scan, prior, fit)) {
    loose.dead_time.sigma *= kLoosened;
    Fit freed = fit;
    if (fit_under(scan, readout, loose, options, freed, work)) {
      freed.quality.readout_released = fit.quality.readout_released;
      freed.quality.dead_time_released = true;
      fit = std::move(freed);
    } else {
      loose.dead_time = prior.dead_time;
    }
  }
  return loose;
}

/// Fits again with a drift where the scan asks for one.
void look_for_drift(const ScanBatch& scan, const Readout& readout, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  if (fit.outcome != FitOutcome::fitted || scan.progress.empty() || !(fit.quality.over_flat >= kEvidence)) return;
  if (!(drift_score(scan, readout, fit.prior, fit, work) > kDriftSuspected)) return;
  Prior with = fit.prior;
  with.drift = Known{0.0, kDriftSigma};
  Fit drifting = fit;
  if (!fit_under(scan, readout, with, options, drifting, work)) return;
  const auto best = [](const Fit& f) { return f.candidates[0].aicc; };
  if (!(best(drifting) < best(fit) - 2.0 * fit.quality.scatter)) return;
  drifting.quality.readout_released = fit.quality.readout_released;
  drifting.quality.dead_time_released = fit.quality.dead_time_released;
  drifting.prior = with;
  fit = std::move(drifting);
}

void fit_one(const ScanBatch& given, std::size_t site, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  ScanBatch scan = given;
  scan.progress = progress_of(scan, work.progress);
  fit = Fit{};
  fit.axis = scan.kind;
  fit.scan_pulse_s = scan.pulse_length_s;
  fit.sampling = sampling_of(scan.kind, scan.axis);
  if (!scan.axis.empty()) {
    const auto [low, high] = std::minmax_element(scan.axis.begin(), scan.axis.end());
    fit.lowest = *low;
    fit.longest = *high;
  }
  const Readout readout = scan.site(site);
  fit.quality.points = measured_points(readout);
  work.objective.reserve(scan.points());
  // AICc needs two points more than there are parameters.
  const ScanObjective simplest(scan, readout, prior, Dynamics::undamped, {}, false, work.objective);
  if (fit.quality.points < std::max(7, simplest.layout().count + 2) || fit.sampling.distinct < 5) {
    fit.outcome = FitOutcome::too_few_points;
    return;
  }
  fit_under(scan, readout, prior, options, fit, work);
  fit.prior = reconciled(scan, readout, prior, options, fit, work);
  look_for_drift(scan, readout, options, fit, work);
  if (fit.outcome == FitOutcome::fitted) return withhold_unshown(options, fit);
  const auto monotone = monotone_half_deviance(readout, scan.axis);
  fit.quality.monotone_gain = 2.0 * (monotone.flat - std::min(monotone.rising, monotone.falling));
}

}  // namespace

void fit(const ScanBatch& scans, std::span<const Prior> priors, const FitOptions& options, std::span<Fit> fits, FitWorkspace& work) {
  for (std::size_t site = 0; site < fits.size(); ++site) fit_one(scans, site, priors[site], options, fits[site], work);
}

bool overlay(const ScanBatch& scan, const Fit& fit, std::span<const double> axis, double z, std::span<double> signal, std::span<double> low,
             std::span<double> high) {
  if (fit.outcome != FitOutcome::fitted) return false;
  ScanBatch drawn = scan;
  drawn.axis = axis;
  drawn.references.reset();
  drawn.progress = {};  // as at the scan's middle
  const Readout nothing{scan.readout, {}, {}};
  ObjectiveWorkspace work;
  work.reserve(axis.size());
  // Whether Delta was fitted follows from the number of parameters.
  Prior known = fit.prior;
  if (ScanObjective(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work).layout().count != fit.x.size()) known.detuning.reset();
  const ScanObjective curve(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work);
  return curve.layout().count == fit.x.size() && curve.draw(fit.x, fit.covariance, z, signal, low, high);
}

double population_after(const Fit& fit, const dynamics::Start& start, double length_s) {
  const Readout nothing{Readout::Kind::gaussian, {}, {}};
  ScanBatch flop;
  ObjectiveWorkspace work;
  const ScanObjective objective(flop, nothing, fit.prior, fit.chosen, {}, fit.negative_contrast, work);
  double population = kUnknown;
  dynamics::Derivatives out;
  out.population = {&population, 1};
  dynamics::Status status = dynamics::Status::ok;
  dynamics::ensemble_duration_scan(fit.rates, objective.ensemble(fit.physical), start, {&length_s, 1}, 0.0, out, {}, status, work.ensemble);
  return status == dynamics::Status::ok ? population : kUnknown;
}

}  // namespace halfturn::infer
