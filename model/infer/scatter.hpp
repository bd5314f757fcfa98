// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>

#include "model/infer/likelihood.hpp"

/// Readings that scatter more than the readout's own noise: with `dispersion` >= 1 times its variance. Counts are then beta-binomial
/// (J. G. Skellam, J. R. Stat. Soc. B 10, 257 (1948)), photons negative binomial, which are what a probability or a rate that
/// fluctuates from point to point makes of them (P. McCullagh, J. A. Nelder, Generalized Linear Models, 2nd ed. (1989), sections
/// 4.5 and 6.2); signals stay normal.
namespace halfturn::infer {

/// Log of the probability (of a signal: its density) of a reading under the readout's own law, were its own mean the model's.
double log_own(Readout::Kind kind, double observed, double weight);

/// Log of the probability of a reading under the dispersed law about `mean` (binomial: 0 < mean < 1; Poisson: > 0). A dispersion
/// beyond what n shots can show is taken as 0.99 n; below 1.0001 the readout's own law.
double log_dispersed(Readout::Kind kind, double observed, double weight, double mean, double dispersion);

/// Minus twice the log likelihood of a scan under the dispersed law, in the units of its deviance: what the deviance is at
/// dispersion 1.
double dispersed_deviance(const Readout& readout, std::span<const double> mean, double dispersion);

/// The dispersion (1 to 400) at which that is least, to a hundredth.
double fitted_dispersion(const Readout& readout, std::span<const double> mean);

/// Probability that of all points of a scan the one furthest out in its own tail lies as far out or further (Sidak 1967).
double furthest_p_value(const Readout& readout, std::span<const double> mean, double dispersion);

}  // namespace halfturn::infer
