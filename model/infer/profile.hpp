// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/linear.hpp"
#include "model/infer/solver.hpp"

/// Profile-likelihood intervals: how far one parameter can go, the others following at their best, before the deviance has
/// risen by a given amount.
namespace halfturn::infer {

struct ProfileOptions {
  double accuracy = 1e-3;       // the end is known to this fraction of its distance from the minimum, or better
  int newton_steps = 12;      // then bracketing takes over, at some four times the cost (profile_test)
  int max_evaluations = 400;  // most calls of the objective for one end
};

struct ProfileEnd {
  enum class Kind : signed char {
    reached,  // the deviance has risen by the threshold here
    bound,    // the parameter's own bound comes first
    open,     // no rise to the threshold out to a million standard errors
    failed,   // not found within the evaluations allowed
  };
  double at = std::numeric_limits<double>::quiet_NaN();  // NaN unless reached or bound
  Kind kind = Kind::failed;
  Vector x;  // all parameters at the end, where it was reached or is a bound
  int evaluations = 0;
};

struct ProfileInterval {
  ProfileEnd low;
  ProfileEnd high;
  /// A point better than the minimum by more than 1e-3 was met on the way, or is promised beside it: the minimum was not
  /// the lowest, and the interval is of no use.
  bool lower_found = false;
};

/// The interval of parameter `index` about `minimum` (converged, within `bounds`) where twice the profiled objective
/// stays within `deviance` > 0 of twice the minimum (3.8415: 95 %; chi_square_quantile). Newton's method on the end
/// itself in the manner of D. J. Venzon, S. H. Moolgavkar, Appl. Statist. 37, 87 (1988), with the Fisher information for
/// their second derivatives, the nuisance parameters moved within their bounds, and the root sought in the square root of
/// the rise, which is near linear; where that fails, false position on the profile minimised point by point. The nuisance
/// parameters follow their optimum from the minimum outward: where another optimum of theirs overtakes it on the way, the
/// end is that of the branch begun with, and may be short; where a profile crosses more than once, the end is the first
/// crossing met. Allocates nothing.
ProfileInterval profile_interval(const Objective& objective, const Minimum& minimum, int index, double deviance,
                                 const Bounds& bounds, const ProfileOptions& options = {});

}  // namespace halfturn::infer
