// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>

#include "model/infer/likelihood.hpp"

/// Whether a fit's deviance is what counting noise explains, also where counts are few and the deviance is no chi-square.
namespace halfturn::infer {

/// Moments of one point's deviance D = 2 half_deviance where `mean` is true.
struct DevianceMoments {
  double mean;        // E[D]; near 1
  double variance;    // Var[D]; near 2
  double covariance;  // Cov[D, score] with the score of PointLikelihood
  double quadratic;   // Cov[D, score^2] / information; near 2
};

/// Exact sums where fewer than 20 counts of the rarer outcome are expected; the asymptotic series of the binomial to
/// 1/n^3 and of Poisson to 1/lambda^5 beyond (expanded about the mean by central moments). At the switch the series are
/// off by less than 1e-5 in the mean and 1.5e-4 in the variance (likelihood_test); `quadratic` is taken as 2 there. A
/// normal reading has 1, 2, 0, 2. A point left out, or with a mean that allows a single outcome, has zeros.
DevianceMoments deviance_moments(Readout::Kind kind, double weight, double mean);

struct Goodness {
  double deviance;  // of the fit
  double expected;  // of its deviance, were the model right
  double variance;
  double p_value;   // probability of a larger deviance; NaN where the deviance can tell nothing (see below)
};

/// Holds a fit's deviance against its moments under the fitted means: a chi-square scaled to the same mean and variance.
/// `parameters` of them (at most kMaxParameters) were fitted; `jacobian` holds d mean / d parameter, one array as long as
/// the scan for each parameter, one after another. With it, the moments allow for the means' being fitted to the same
/// data: mean and variance given the fit, after P. McCullagh, Int. Stat. Rev. 53, 61 (1985), to second order; with normal
/// errors that is points minus parameters. An empty jacobian spreads the parameters evenly over the points, which leaves
/// the variance too large for sparse counts. The p-value is NaN where no degree of freedom is left, or where the variance
/// is below 0.02 a point: with one shot a point the deviance is a function of the fit and says nothing of its quality.
Goodness goodness(const Readout& readout, std::span<const double> mean, int parameters, std::span<const double> jacobian = {});

}  // namespace halfturn::infer
