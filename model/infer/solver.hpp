// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <limits>

#include "model/infer/linear.hpp"

/// Minimises a negative log likelihood within simple bounds by Fisher scoring in a trust region. It knows an objective and
/// nothing of what it stands for.
namespace halfturn::infer {

/// A negative log likelihood, up to a constant (half a deviance, say), in natural units: a change of 0.5 is one sigma.
class Objective {
 public:
  virtual ~Objective() = default;
  /// Fills `value` at x and, where the pointers are not null, the gradient and the Fisher (expected) information, a
  /// symmetric positive semidefinite matrix. Returns false where x has no finite value; what was filled is then ignored.
  virtual bool evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const = 0;
};

/// Simple bounds, closed; infinite where there is none. Equal bounds hold a coordinate fixed.
struct Bounds {
  Vector lower;
  Vector upper;
  static Bounds none(int parameters);
};

struct SolverOptions {
  /// Converged when the decrease that the quadratic model still promises is below this. 1e-10 is 1.4e-5 of a sigma.
  double decrease_tolerance = 1e-10;
  /// Most calls of the objective. Of the published starts that succeed the longest takes about 150, a median one 8 (solver_test).
  int max_evaluations = 300;
  /// Length of the first step at most, in units of the parameters' conditional sigmas; infinite leaves the first step free.
  double first_radius = std::numeric_limits<double>::infinity();
  /// The search is given up where three times the decrease still promised would leave the value above this: among several starts, those
  /// that cannot come near the best.
  double give_up_above = std::numeric_limits<double>::infinity();
};

enum class Outcome : signed char {
  converged,        // the promised decrease is below the tolerance
  stalled,          // no step, however short, lowers the objective, though the model promises a decrease
  iteration_limit,  // max_evaluations are used up
  given_up,         // nothing below give_up_above is in sight
  not_finite,       // the objective cannot be computed at the start, or the start and the bounds are no valid problem
};

struct Minimum {
  Vector x;
  double value = std::numeric_limits<double>::quiet_NaN();
  Vector gradient;
  Matrix information;
  /// -1 at the lower bound, +1 at the upper, 2 where equal bounds hold it, 0 between.
  std::array<signed char, kMaxParameters> at_bound{};
  /// What the quadratic model promises to gain from x on within the bounds, in the objective's units.
  double expected_decrease = std::numeric_limits<double>::quiet_NaN();
  int evaluations = 0;
  Outcome outcome = Outcome::not_finite;
};

/// The local minimum below `start` (moved inside the bounds first). Steps minimise the quadratic model of gradient and
/// Fisher information within the bounds (primal active set) and within an ellipsoid whose axes are the largest
/// information seen for each parameter (J. J. More, Springer LNM 630, 105 (1978), section 6), so the path
/// does not depend on the parameters' units. Start and bounds have one size, 1 to kMaxParameters. Near the minimum one
/// secant update corrects the information by the gradient's last change; `information` itself stays as the objective gave
/// it. Allocates nothing. `value` never exceeds that at the start but for rounding. Sizes that differ, a NaN, or a lower
/// bound above its upper give Outcome::not_finite.
Minimum minimise(const Objective& objective, const Vector& start, const Bounds& bounds, const SolverOptions& options = {});

}  // namespace halfturn::infer
