// SPDX-License-Identifier: Apache-2.0
#include "model/infer/second_component.hpp"

#include <algorithm>
#include <array>
#include <cmath>

#include "model/infer/outliers.hpp"
#include "model/infer/rules.hpp"
#include "model/infer/second_doubt.hpp"
#include "model/infer/starts.hpp"
#include "model/infer/under_prior.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

using constants::kPi;
using constants::kTwoPi;

// A second component is looked for where the deviance is more improbable than this; see the header. Of 40 flops of two components whose
// answer was wrong (campaign, seeds 1, 7 and 11, 1244 scans) 38 lay below it, 27 below 0.1; of 15 lines of two (seed 1) all below 0.02.
constexpr double kSuspected = 0.5;
// Gain at which it is taken as seen: it leaves 14 of those 40, whose gain is 2 to 16 (12 leaves 9, 14 leaves 11), for an ensemble or noise
// describes them nearly as well. Of 574 healthy flops of one component, searched whatever their deviance, the highest gained 14.4 (above 12
// and in doubt: 3), of 107 such lines 11.7; of 250 flops whose dead time had jumped one reached 15.2 (dead_time_test).
constexpr double kSeen = 16.0;
// ... or where it is likelier than what was fitted (second_doubt.hpp): of 647 healthy flops (clean, few_points, grid_gapped, decay,
// spread; seed 6) none was above 0.3, and of 250 whose dead time had jumped one came to 0.5 (dead_time_test).
constexpr double kLikely = 1.0;
// A pulse length further than this from that of two components is in doubt: in its own standard errors, which scatter may have widened
// beyond what is harmless, and as an angle, rad.
constexpr double kDoubted = 2.0, kDoubtedAngle = 0.025;
// Frequencies tried, over the one found; steps of this part of a resolution element, at most so many.
constexpr double kSlowest = 0.5, kFastest = 1.8, kStep = 0.2;
constexpr double kMostSteps = 60.0;
// Lines tried to so many 1/pulse length outside the window, in steps of this part of it.
constexpr double kBeyond = 0.3, kLineStep = 0.15;
// So many pairs of a shape are refined, and of a line's shapes together.
constexpr std::size_t kPairs = 4, kLinePairs = 6;

// Starts are only sorted at first, as those of one component are; the best is finished where it gains more than this, below which it is not
// heard.
constexpr double kWorthFinishing = 1.0;

/// Shapes of one component at each place that is tried, a column a place.
struct Shapes {
  Eigen::MatrixXd at;
  std::vector<double> place;
  double rabi = 0.0;  // of lines
  double step = 0.0;
};

/// Two components of one shape that describe the readings, value ~ constant + first s(place) + second s(place), `first` the larger.
struct Pair {
  double gain, first_place, second_place, first, second, rabi;
};

Shapes oscillations(const ScanBatch& scan, const Fit& fit, double main) {
  Shapes shapes;
  const double resolved = kTwoPi / fit.sampling.span;
  const double low = std::max(kSlowest * main, 0.4 * resolved), high = std::min(kFastest * main, fit.sampling.limit);
  shapes.step = std::max((high - low) / kMostSteps, kStep * resolved);
  for (double w = low; w <= high; w += shapes.step) shapes.place.push_back(w);
  shapes.at.resize(static_cast<Eigen::Index>(scan.points()), static_cast<Eigen::Index>(shapes.place.size()));
  for (Eigen::Index j = 0; j < shapes.at.cols(); ++j)
    for (Eigen::Index i = 0; i < shapes.at.rows(); ++i) {
      const double length = std::max(0.0, scan.axis[static_cast<std::size_t>(i)] - fit.physical.dead_time);
      shapes.at(i, j) = 0.5 - 0.5 * std::cos(shapes.place[static_cast<std::size_t>(j)] * length);
    }
  return shapes;
}

/// Rabi's formula (I. I. Rabi, Phys. Rev. 51, 652 (1937)) about every place.
Shapes lines(const ScanBatch& scan, const Fit& fit, double rabi) {
  Shapes shapes;
  shapes.rabi = rabi;
  const double length = scan.pulse_length_s - fit.physical.dead_time, natural = kTwoPi / length;
  const double low = fit.lowest - kBeyond * natural, high = fit.longest + kBeyond * natural;
  shapes.step = std::max((high - low) / kMostSteps, kLineStep * natural);
  for (double at = low; at <= high; at += shapes.step) shapes.place.push_back(at);
  shapes.at.resize(static_cast<Eigen::Index>(scan.points()), static_cast<Eigen::Index>(shapes.place.size()));
  for (Eigen::Index j = 0; j < shapes.at.cols(); ++j)
    for (Eigen::Index i = 0; i < shapes.at.rows(); ++i) {
      const double off = scan.axis[static_cast<std::size_t>(i)] - shapes.place[static_cast<std::size_t>(j)];
      const double whole = std::sqrt(rabi * rabi + off * off), turned = rabi / whole * std::sin(0.5 * whole * length);
      shapes.at(i, j) = turned * turned;
    }
  return shapes;
}

/// All pairs of places solved for by least squares; those of the sign of the contrast, the best first.
std::vector<Pair> solved_pairs(const Shapes& shapes, const Eigen::VectorXd& value, const Eigen::VectorXd& weight, double contrast) {
  const double whole = weight.sum();
  const Eigen::VectorXd y = value.array() - weight.dot(value) / whole;
  const Eigen::MatrixXd centred = shapes.at.rowwise() - (weight.transpose() * shapes.at / whole);
  const Eigen::MatrixXd weighted = weight.asDiagonal() * centred;
  const Eigen::MatrixXd g = centred.transpose() * weighted;
  const Eigen::VectorXd r = weighted.transpose() * y;
  std::vector<Pair> pairs;
  for (Eigen::Index j = 0; j < g.cols(); ++j)
    for (Eigen::Index k = j + 1; k < g.cols(); ++k) {
      const double determinant = g(j, j) * g(k, k) - g(j, k) * g(j, k);
      if (!(determinant > 1e-6 * g(j, j) * g(k, k))) continue;
      const double a = (r[j] * g(k, k) - r[k] * g(j, k)) / determinant, b = (r[k] * g(j, j) - r[j] * g(j, k)) / determinant;
      if (!(a * contrast > 0.0 && b * contrast > 0.0)) continue;
      const double at_a = shapes.place[static_cast<std::size_t>(j)], at_b = shapes.place[static_cast<std::size_t>(k)];
      const double gain = a * r[j] + b * r[k];
      pairs.push_back(std::abs(a) < std::abs(b) ? Pair{gain, at_b, at_a, b, a, shapes.rabi} : Pair{gain, at_a, at_b, a, b, shapes.rabi});
    }
  std::sort(pairs.begin(), pairs.end(), [](const Pair& a, const Pair& b) { return a.gain > b.gain; });
  return pairs;
}

/// The best few that are not neighbours of better ones.
void keep_distinct(const std::vector<Pair>& pairs, double step, std::vector<Pair>& kept) {
  const std::size_t before = kept.size();
  for (const auto& pair : pairs) {
    if (kept.size() == before + kPairs) return;
    const bool neighbour = std::any_of(kept.begin() + static_cast<std::ptrdiff_t>(before), kept.end(), [&](const Pair& other) {
      return std::abs(other.first_place - pair.first_place) < 1.5 * step && std::abs(other.second_place - pair.second_place) < 1.5 * step;
    });
    if (!neighbour) kept.push_back(pair);
  }
}

std::vector<Pair> starting_pairs(const ScanBatch& scan, const Readout& readout, const Fit& fit, double main) {
  const auto n = static_cast<Eigen::Index>(scan.points());
  Eigen::VectorXd value(n), weight(n);
  linear_points(readout, {value.data(), scan.points()}, {weight.data(), scan.points()});
  std::vector<Pair> kept;
  const auto add = [&](const Shapes& shapes) {
    keep_distinct(solved_pairs(shapes, value, weight, fit.physical.contrast()), shapes.step, kept);
  };
  if (scan.kind == Axis::duration) {
    add(oscillations(scan, fit, main));
    return kept;
  }
  const double length = scan.pulse_length_s - fit.physical.dead_time;
  for (const double rabi : {main, 0.5 * kPi / length, kPi / length, 1.5 * kPi / length, 2.0 * kPi / length}) add(lines(scan, fit, rabi));
  std::sort(kept.begin(), kept.end(), [](const Pair& a, const Pair& b) { return a.gain > b.gain; });
  if (kept.size() > kLinePairs) kept.resize(kLinePairs);
  return kept;
}

Physical started(const ScanBatch& scan, const Fit& fit, const Pair& pair) {
  const bool line = scan.kind == Axis::detuning;
  Physical start = fit.physical;
  const double depth = line ? pair.first : pair.first + pair.second;
  start.second_share = pair.second / depth;
  start.damping = line ? 0.05 * kTwoPi / scan.pulse_length_s : 0.1 / fit.sampling.span;
  start.dephasing = start.breadth = 0.0;
  start.signal_excited = start.signal_ground + depth;
  keep_signals_possible(scan.readout, start);
  start.generalised = line ? pair.rabi : pair.first_place;
  start.line_offset = line ? pair.first_place : 0.0;
  start.second_place = line ? pair.second_place - pair.first_place : pair.second_place / pair.first_place;
  start.detuning_square = std::min(start.detuning_square, 0.5 * start.generalised * start.generalised);
  return start;
}

/// What two components leave at best: minus twice the log likelihood, in units of the deviance, priors counted.
struct Best {
  double left = std::numeric_limits<double>::infinity();
  Minimum minimum;
};
Best best_of_two(const ScanBatch& scan, const Readout& readout, const ScanObjective& two, const Fit& fit, double main, double left_by_one) {
  Best best;
  const auto descend = [&](const Vector& from, const SolverOptions& options) {
    const auto minimum = minimise(two, from, two.bounds(), options);
    const double left = 2.0 * minimum.value * readout.dispersion;
    if (left < best.left) best = {left, minimum};
  };
  for (const auto& pair : starting_pairs(scan, readout, fit, main)) descend(two.pack(started(scan, fit, pair)), kSorting);
  if (left_by_one - best.left > kWorthFinishing) descend(Vector(best.minimum.x), {});
  return best;
}

/// The same of the component that was fitted; of a fit with outliers with these, which two components may have passed for. NaN where it
/// cannot be computed.
double left_by_single(const ScanObjective& one, const Readout& readout, const Fit& fit, FitWorkspace& work) {
  double half = kUnknown;
  if (fit.outlier_share == 0.0) return one.evaluate(one.pack(fit.physical), half, nullptr, nullptr) ? 2.0 * half * fit.dispersion : kUnknown;
  work.signal.resize(readout.observed.size());
  one.data_part(fit.physical, half, work.signal);  // a reading that one without outliers rules out does not matter here
  return contaminated_deviance(readout, work.signal, fit.outlier_share);
}

bool pulses_doubted(const FitOptions& options, const Fit& fit, const Physical& two) {
  if (options.pulses.empty()) return true;
  for (std::size_t i = 0; i < options.pulses.size() && i < fit.pulse_length_s.size(); ++i) {
    const auto& pulse = options.pulses[i];
    const double length = two.dead_time + best_pulse_of_two(two.generalised, two.second_share, two.second_place, pulse.angle_rad) / pulse.area_factor;
    const auto& given = fit.pulse_length_s[i];
    const double off = std::abs(length - given.value);
    if (!(off <= kDoubted * given.sigma && off * fit.generalised.value <= kDoubtedAngle)) return true;
  }
  return false;
}

bool suspected(const Fit& fit) {
  if (fit.outcome != FitOutcome::fitted || !(fit.quality.over_flat >= kEvidence)) return false;
  return fit.quality.p_value < kSuspected || (fit.axis == Axis::duration && is_ensemble(fit.chosen));
}

}  // namespace

double best_pulse_of_two(double rabi, double share, double ratio, double angle_rad) {
  constexpr int kSteps = 128;
  const double shortest = 0.5 * angle_rad / rabi, step = 1.5 * angle_rad / rabi / kSteps;
  const auto turned = [&](double length) {
    return (1.0 - share) * std::cos(rabi * length - angle_rad) + share * std::cos(ratio * rabi * length - angle_rad);
  };
  double best = shortest, most = turned(shortest);
  for (int i = 1; i <= kSteps; ++i)
    if (const double value = turned(shortest + i * step); value > most) {
      most = value;
      best = shortest + i * step;
    }
  // The top of a parabola through the highest and its neighbours.
  const double before = turned(best - step), after = turned(best + step), bend = before - 2.0 * most + after;
  return bend < 0.0 ? best + 0.5 * step * std::clamp((before - after) / bend, -1.0, 1.0) : best;
}

void look_for_second(const ScanBatch& scan, const Readout& readout, const FitOptions& options, Fit& fit, FitWorkspace& work) {
  fit.quality.second.reset();
  if (!suspected(fit)) return;
  Readout plain = readout;
  plain.dispersion = fit.dispersion;
  const Prior known = felt_prior(fit);
  const ScanObjective one(scan, plain, known, fit.chosen, {}, fit.negative_contrast, work.objective);
  const double left_by_one = left_by_single(one, readout, fit, work);
  if (!std::isfinite(left_by_one)) return;
  const double main = one.apparent_frequency(fit.physical);
  Prior with = known;
  with.second = true;
  const ScanObjective two(scan, plain, with, Dynamics::dephasing, {}, fit.negative_contrast, work.objective);
  const auto best = best_of_two(scan, plain, two, fit, main, left_by_one);
  if (!std::isfinite(best.left)) return;
  const double scatter = std::max(1.0, best.left / std::max(1.0, fit.quality.dof - 2.0)), gain = (left_by_one - best.left) / scatter;
  const bool line = scan.kind == Axis::detuning;
  const SecondFound second{two, best.minimum, gain, std::max(1.0, scatter / fit.dispersion)};
  const bool seen = gain > kSeen || (!line && likelihood_of_second(second, fit) > kLikely);
  const Physical found = two.unpack(best.minimum.x);
  if (seen && (line || pulses_doubted(options, fit, found))) {
    const double first = line ? found.line_offset : found.generalised;
    fit.quality.second = {first, line ? first + found.second_place : first * found.second_place, found.second_share, gain};
  } else if (!line && !(gain > kSeen)) {
    heed_second(second, options, fit);
  }
}

}  // namespace halfturn::infer
