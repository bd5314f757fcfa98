// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <vector>

#include "model/infer/likelihood.hpp"

/// The best monotone curves through a scan: rivals of an oscillation, at their most flexible.
namespace halfturn::infer {

struct MonotoneFit {
  double rising;   // half deviance of the best non-decreasing means
  double falling;  // of the best non-increasing means
  double flat;     // of the best constant mean
};

/// Half deviances of the maximum-likelihood means that are monotone in `axis` (any order; points at equal axis share a
/// mean), by pooling adjacent violators, which for these three likelihoods are weighted means (R. E. Barlow, D. J.
/// Bartholomew, J. M. Bremner, H. D. Brunk, Statistical Inference under Order Restrictions (1972), section 2.3). `rising`
/// and `falling` never exceed `flat`. Points left out of the likelihood are left out here. Time n log n.
MonotoneFit monotone_half_deviance(const Readout& readout, std::span<const double> axis);

/// Those means, at every point: `direction` 1 rising, -1 falling, 0 flat. Empty where nothing was measured.
std::vector<double> monotone_means(const Readout& readout, std::span<const double> axis, int direction);

}  // namespace halfturn::infer
