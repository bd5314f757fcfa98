// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>

#include "model/infer/conditioning.hpp"
#include "model/infer/profile.hpp"
#include "model/infer/solution.hpp"

/// From minima to estimates: what the fit of one scan and that of several share.
namespace halfturn::infer {

// A candidate with less Akaike weight than this moves no estimate by more than a fiftieth of what it is off by.
inline constexpr double kWeightHeard = 0.02;

inline constexpr std::string_view kNotThisScan = "a scan of this kind does not hold it";

struct Scale {
  double scatter = 1.0;
  double level = 0.95;
  double z = 0.0;  // of the level, two-sided; its square is the deviance's quantile
  double quantile() const { return z * z; }

  Scale(double scatter_, double level_);
};

/// The estimate of a standard error, with its reason where there is none.
Estimate from_covariance(double value, double variance, const Scale& scale);

/// Estimate of one coordinate, of this variance at the minimum, with its profile interval.
Estimate profiled(const Objective& objective, const Bounds& bounds, const Minimum& minimum, int index, double variance, const Scale& scale);

/// One candidate's say.
struct Part {
  double weight;
  Estimate estimate;
};

/// Quantile of the mixture of the parts' laws, each normal with sides as wide as its interval, which is at `z` standard errors. The
/// weights sum to 1.
double mixture_quantile(std::span<const Part> parts, double probability, double z);

/// Value and variance averaged over candidates with their weights (K. P. Burnham, D. R. Anderson, Model Selection and Multimodel
/// Inference, 2nd ed. (2002), section 4.3), the interval from the mixture of their profile intervals. `parts` is put in order.
Estimate averaged(std::span<Part> parts, const Scale& scale);

/// An estimate in other units.
Estimate times(Estimate e, double factor);

/// The estimates that follow from `physical`, `rates` and `covariance` of a fit, which are filled: dampings, the ensemble's parameter,
/// drift, floor, contrast and dead time.
void fill_from_covariance(const Problem& problem, const ScanObjective& objective, const Scale& scale, Fit& fit, FitWorkspace& work);

}  // namespace halfturn::infer
