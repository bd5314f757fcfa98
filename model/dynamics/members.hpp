// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/dynamics/ensemble.hpp"

/// The members that stand for an ensemble.
namespace halfturn::dynamics::detail {

/// What the choice of members depends on.
struct Demand {
  double coupling_phase = 0;  // |Omega| times the longest effective length, rad, at least 0
  double longest_s = 0;       // that length
  bool halved = false;        // doppler: members at +h and -h are alike, so that those at h > 0 serve for both
  bool excited = false;       // thermal: atoms begin in e
  double cost = 1;            // of one member in units of merging one level into one member (motion.hpp)
};

/// Whether the ensemble is within the ranges of ensemble.hpp.
bool valid(const Ensemble& ensemble);

/// Fills workspace.members; their weights add up to 1. not_finite where the phase or the length is not finite. Not for
/// Kind::none.
Status choose_members(const Ensemble& ensemble, const Demand& demand, EnsembleWorkspace& workspace);

/// The density of a cloud's exponent: x = exp(-exponent y), y distributed as exp(-y). exponent = 1/kappa.
struct CloudExponent {
  double value, by_parameter;
};
CloudExponent cloud_exponent(const Ensemble& ensemble);

}  // namespace halfturn::dynamics::detail
