// SPDX-License-Identifier: Apache-2.0
#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>
#include <optional>
#include <vector>

#include "model/infer/estimate.hpp"
#include "model/infer/line_modes.hpp"
#include "model/infer/rules.hpp"

/// A line's centre over all modes that the scan leaves possible.
namespace halfturn::infer {
namespace {

constexpr double kWeighed = 20.0;  // deviance above the best beyond which a mode weighs nothing
// A pulse area that the scan leaves free is spread by no more than this in its logarithm: a factor of three.
constexpr double kMostLogArea = 1.1;

/// What a solution's information says of offset and area, scatter not counted.
struct Place {
  double sigma = 0.0;   // of the offset, rad/s
  double volume = 0.0;  // standard error of the offset at a given area, times that of the area's logarithm
};

/// The inverse of the information restricted to what is not at a bound (the offset is free in any case).
std::optional<Matrix> covariance_of_free(const Minimum& minimum, int offset) {
  const Matrix& information = minimum.information;
  Vector scale = information.diagonal().cwiseMax(1e-300).cwiseSqrt().cwiseInverse();
  for (Eigen::Index i = 0; i < scale.size(); ++i)
    if (minimum.at_bound[static_cast<std::size_t>(i)] != 0 && i != offset) scale[i] = 0.0;
  Matrix scaled = scale.asDiagonal() * information * scale.asDiagonal();
  for (Eigen::Index i = 0; i < scale.size(); ++i)
    if (scale[i] == 0.0) scaled(i, i) = 1.0;
  const Eigen::LLT<Matrix> factors(scaled);
  if (factors.info() != Eigen::Success) return std::nullopt;
  const Matrix inverse = factors.solve(Matrix::Identity(scale.size(), scale.size()));
  return Matrix(scale.asDiagonal() * inverse * scale.asDiagonal());
}

std::optional<Place> place_of(const Problem& problem, const Solution& solution, ObjectiveWorkspace& work) {
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, solution.dynamics, {}, solution.negative_contrast, work);
  const int offset = objective.layout().line_offset, lead = objective.layout().lead;
  const auto covariance = covariance_of_free(solution.minimum, offset);
  if (!covariance) return std::nullopt;
  const double variance = (*covariance)(offset, offset), of_area = (*covariance)(lead, lead), both = (*covariance)(offset, lead);
  if (!(variance > 0.0)) return std::nullopt;
  Place place{std::sqrt(variance), 0.0};
  const double alone = of_area > 0.0 ? std::sqrt(std::max(0.0, variance - both * both / of_area)) : place.sigma;
  const double log_area = std::sqrt(std::max(0.0, of_area)) / solution.physical.generalised;
  place.volume = alone * (log_area > 0.0 ? std::min(log_area, kMostLogArea) : kMostLogArea);
  return place;
}

/// What all of a line's modes say, those of the chosen one together and first.
class AllModes {
 public:
  AllModes(const Problem& problem, std::span<const ModeSolutions> modes, std::size_t chosen, const Fit& fit)
      : problem_(problem), scatter_(fit.quality.scatter), z_(Scale(1.0, problem.options.level).z), best_(modes[chosen].best()) {
    work_.reserve(problem.scan.points());
    parts_.push_back({0.0, fit.line_offset});
    same_.push_back(true);
    for (const Solution& solution : modes[chosen].solutions) counted_.push_back(&solution);
    for (const Solution& solution : modes[chosen].solutions)
      if (const auto place = place_of(problem_, solution, work_)) parts_[0].weight += weight(solution, *place);
    for (std::size_t i = 0; i < modes.size(); ++i)
      if (i != chosen) add(modes[i], fit.quality.line_width);
  }

  bool alone() const { return parts_.size() == 1 || !(parts_[0].weight > 0.0); }

  void fill(double level, Estimate& offset) {
    double total = 0.0, first = 0.0, second = 0.0, all = 0.0;
    for (std::size_t i = 0; i < parts_.size(); ++i) {
      const auto& [weight, estimate] = parts_[i];
      all += weight;
      if (!same_[i]) continue;
      total += weight;
      first += weight * estimate.value;
      second += weight * (estimate.value * estimate.value + estimate.sigma * estimate.sigma);
    }
    for (Part& part : parts_) part.weight /= all;
    offset.value = first / total;
    offset.sigma = std::sqrt(std::max(0.0, second / total - offset.value * offset.value));
    offset.low = std::min(offset.value, mixture_quantile(parts_, 0.5 * (1.0 - level), z_));
    offset.high = std::max(offset.value, mixture_quantile(parts_, 0.5 * (1.0 + level), z_));
  }

 private:
  double above(const Solution& solution) const {
    return quasi_aicc(solution, scatter_) - quasi_aicc(best_, scatter_) + held_by_area(problem_, solution) - held_by_area(problem_, best_);
  }
  double weight(const Solution& solution, const Place& place) const { return place.volume * std::exp(-0.5 * above(solution)); }

  /// Whether another start led to the same minimum, which counts once.
  bool counted(const Solution& solution, double close) {
    const auto alike = [&](const Solution* other) {
      return other->dynamics == solution.dynamics && std::abs(other->minimum.value - solution.minimum.value) < 0.01 &&
             std::abs(other->physical.line_offset - solution.physical.line_offset) < close;
    };
    if (std::any_of(counted_.begin(), counted_.end(), alike)) return true;
    counted_.push_back(&solution);
    return false;
  }

  void add(const ModeSolutions& mode, double width) {
    for (const Solution& solution : mode.solutions) {
      if (!(above(solution) < kWeighed)) continue;
      const auto place = place_of(problem_, solution, work_);
      if (!place) continue;
      const double at = solution.physical.line_offset, sigma = place->sigma * std::sqrt(scatter_);
      if (counted(solution, 0.1 * sigma)) continue;
      parts_.push_back({weight(solution, *place), {at, sigma, at - z_ * sigma, at + z_ * sigma}});
      same_.push_back(one_line(solution, best_, width));
    }
  }

  const Problem& problem_;
  double scatter_, z_;
  const Solution& best_;
  std::vector<Part> parts_;
  std::vector<bool> same_;
  std::vector<const Solution*> counted_;
  ObjectiveWorkspace work_;
};

}  // namespace

void widen_offset(const Problem& problem, std::span<const ModeSolutions> modes, std::size_t chosen, Fit& fit) {
  Estimate& offset = fit.line_offset;
  if (!std::isfinite(offset.sigma) || !std::isfinite(offset.low) || !std::isfinite(offset.high)) return;
  AllModes all(problem, modes, chosen, fit);
  if (!all.alone()) all.fill(problem.options.level, offset);
}

}  // namespace halfturn::infer
