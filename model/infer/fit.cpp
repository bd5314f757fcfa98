// SPDX-License-Identifier: Apache-2.0
#include "model/infer/fit.hpp"

#include <algorithm>
#include <cmath>

#include "model/infer/monotone.hpp"
#include "model/infer/outliers.hpp"
#include "model/infer/scatter.hpp"
#include "model/infer/solution.hpp"

namespace halfturn::infer {
namespace {

constexpr std::size_t kMostModes = 16;
// Delta is left out of a flop where even 3 sigma of it would change the frequency by less than this part.
constexpr double kNegligibleDetuning = 1e-5;

/// The prior without a detuning too small to be felt at the frequencies found.
Prior felt(const Prior& prior, std::span<const Mode> starts) {
  Prior reduced = prior;
  if (!prior.detuning) return reduced;
  const double most = std::abs(prior.detuning->mean) + 3.0 * prior.detuning->sigma;
  double slowest = std::numeric_limits<double>::infinity();
  for (const auto& start : starts) slowest = std::min(slowest, start.start.generalised);
  if (0.5 * most * most < kNegligibleDetuning * slowest * slowest) reduced.detuning.reset();
  return reduced;
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
// Where a residual of so many sigmas lies, a softened likelihood (Readout::softness) begins to pull less.
constexpr double kSoftness = 1.5;
// Share of outliers that is allowed for at first; and the factor by which the one then found must differ for a second fit.
constexpr double kFirstShare = 0.08, kShareDiffers = 2.0;
// Scans whose deviance is more probable than the first are not searched for outliers; between it and the second only those where
// some about the fitted curve gain so much deviance.
constexpr double kSuspected = 0.1, kSurelySuspected = 1e-2, kSuspicious = 6.0;
// Deviance by which outliers must explain a scan better than the readout's own noise does. Between them and scatter, which have as many
// parameters, the likelihood decides.
constexpr double kOutliersDecide = 6.0;
// Scatter of less than this changes no interval by more than a fortieth, and is counted without a second fit.
constexpr double kScatterCounts = 1.05;
// Deviance gained over a flat line that a fit must show for what it says of the readout to count.
constexpr double kEvidence = 30.0;

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
    start.start.damping *= 0.5;  // the envelope's rate, nearly
  }
  return count;
}

/// Puts the candidates of a mode in the order that they have with scatter counted; true where another is now the best.
bool rank_with_scatter(ModeSolutions& mode, double scatter) {
  const Dynamics before = mode.best().dynamics;
  std::stable_sort(mode.solutions.begin(), mode.solutions.end(),
                   [scatter](const Solution& a, const Solution& b) { return a.quasi_aicc(scatter) < b.quasi_aicc(scatter); });
  return mode.best().dynamics != before;
}

/// A scatter found from few points is uncertain itself: variance of Student's t over that of the normal law (Student, Biometrika 6, 1
/// (1908)), 1 where the readout's own noise is all there is.
double by_few_points(double scatter, double dof) { return scatter > 1.0 ? std::max(dof, 4.0) / (std::max(dof, 4.0) - 2.0) : 1.0; }

/// What the scan shows under one prior; false where nothing could be fitted.
bool fit_under(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  std::array<Mode, kMostModes> starts;
  const auto find = scan.kind == Axis::duration ? duration_starts : line_starts;
  std::size_t count = find(scan, readout, prior, fit.sampling, starts, work.search);
  const Prior known = felt(prior, {starts.data(), count});
  const int points = fit.quality.points;
  const Problem problem{scan, readout, known, options, fit.sampling, points};
  if (!readout.odds.empty()) count = settled(problem, starts, count, work);
  auto modes = refine_modes(problem, {starts.data(), count}, work);
  fit.pulse_length_s.clear();
  fit.quality = FitQuality{};
  fit.quality.points = points;
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
  fit.quality.outside_expect = of_choice.outside_expect;
  fit.quality.by_history = of_choice.by_history;
  fit.quality.rival = of_choice.rival;
  const double scatter = fit.quality.scatter;
  fit.dispersion = readout.dispersion;
  fit.quality.scatter = uncounted(scatter) * by_few_points(scatter, fit.quality.dof);
  estimate(problem, modes[chosen], fit, work);
  fit.quality.scatter = scatter;
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
  const double share = fit.dead_time_s.sigma * fit.dead_time_s.sigma / (fit.quality.scatter / fit.dispersion * sigma * sigma);
  // Where the prior holds nine tenths of what is known, the points have no say of their own.
  const bool told = 1.0 - share > kPointsHeard;
  return std::abs(z) > kContradicted || (told && z * z > kContradicted * kContradicted * (1.0 - share));
}

/// Whether a line scan is badly described with the Rabi frequency that history knows: it may have been taken at another power that
/// nobody stated.
bool history_contradicted(const ScanBatch& scan, const Prior& prior, const Fit& fit) {
  if (scan.kind == Axis::duration || !prior.log_rabi) return false;
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.over_flat >= kEvidence) || fit.quality.p_value < 0.01) return true;
  return std::abs(std::log(fit.physical.generalised) - prior.log_rabi->mean) > kContradicted * std::max(prior.log_rabi->sigma, 1e-6);
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

/// The signal that a fit has at each point.
bool curve_of(const ScanBatch& scan, const Readout& readout, const Fit& fit, FitWorkspace& work) {
  if (fit.outcome != FitOutcome::fitted) return false;
  const ScanObjective objective(scan, readout, fit.prior, fit.chosen, {}, fit.negative_contrast, work.objective);
  double half_deviance = 0.0;
  work.signal.resize(scan.points());
  return objective.data_part(fit.physical, half_deviance, work.signal);
}

/// What outliers must fall below: minus twice the log likelihood of the readings about work.signal as they are, less a margin, or with
/// scatter.
double without_outliers(const Readout& readout, const Fit& fit, FitWorkspace& work) {
  const double scattered = dispersed_deviance(readout, work.signal, fitted_dispersion(readout, work.signal));
  return std::min(fit.quality.deviance - kOutliersDecide, scattered);
}

bool outliers_suspected(const Readout& readout, const Fit& fit, FitWorkspace& work) {
  if (fit.quality.p_value < kSurelySuspected) return true;
  const double share = fitted_share(readout, work.signal);
  return contaminated_deviance(readout, work.signal, share) < fit.quality.deviance - kSuspicious;
}

/// Fits under a readout and the prior that the scan does not contradict; false where nothing could be fitted.
bool fit_with(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  fit_under(scan, readout, prior, options, fit, work);
  fit.prior = reconciled(scan, readout, prior, options, fit, work);
  return fit.outcome == FitOutcome::fitted;
}

/// Fits a scan that scatters anew with its scatter in the likelihood: while the points spoke louder than they may, they overruled priors.
void count_scatter(const ScanBatch& scan, Readout readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.scatter > kScatterCounts)) return;
  readout.dispersion = fit.quality.scatter;
  Fit anew = fit;
  if (fit_with(scan, readout, prior, options, anew, work)) fit = std::move(anew);
}

/// Where the scan's deviance is improbable, fits it again with outliers allowed for, and takes that fit where it explains the points
/// better than scatter does. The share of outliers is the one that the first such fit finds.
void allow_for_outliers(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit,
                        FitWorkspace& work) {
  if (!(fit.quality.p_value < kSuspected) || !curve_of(scan, readout, fit, work) || !outliers_suspected(readout, fit, work)) return;
  const double without = without_outliers(readout, fit, work);
  std::vector<double> odds(scan.points());
  Readout contaminated = readout;
  contaminated.odds = odds;
  Fit robust = fit;
  double share = kFirstShare;
  for (int pass = 0; pass < 2; ++pass) {
    outlier_odds(readout, share, odds);
    robust.outlier_share = share;
    if (!fit_with(scan, contaminated, prior, options, robust, work) || !curve_of(scan, contaminated, robust, work)) return;
    share = fitted_share(readout, work.signal);
    if (std::max(share / robust.outlier_share, robust.outlier_share / share) < kShareDiffers) break;
  }
  if (!(contaminated_deviance(readout, work.signal, share) < without)) return;
  fit = std::move(robust);
  count_scatter(scan, contaminated, prior, options, fit, work);
}

void fit_one(const ScanBatch& scan, std::size_t site, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  fit = Fit{};
  fit.axis = scan.kind;
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
  fit_with(scan, readout, prior, options, fit, work);
  allow_for_outliers(scan, readout, prior, options, fit, work);
  if (fit.outlier_share == 0.0) count_scatter(scan, readout, prior, options, fit, work);
  if (fit.outcome == FitOutcome::fitted) return;
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
  const Readout nothing{scan.readout, {}, {}};
  ObjectiveWorkspace work;
  work.reserve(axis.size());
  // Whether Delta was fitted follows from the number of parameters.
  Prior known = fit.prior;
  if (ScanObjective(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work).layout().count != fit.x.size()) known.detuning.reset();
  const ScanObjective curve(drawn, nothing, known, fit.chosen, {}, fit.negative_contrast, work);
  return curve.layout().count == fit.x.size() && curve.draw(fit.x, fit.covariance, z, signal, low, high);
}

}  // namespace halfturn::infer
