// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>

#include "model/infer/linear.hpp"

/// Small convex quadratic programmes with simple bounds, the inner problem of the solver and of the profiles.
namespace halfturn::infer {

/// A step, and which of its coordinates are free of their bounds.
struct BoxStep {
  Vector step;
  std::array<bool, kMaxParameters> free{};
};

/// Minimises g'p + p'Hp/2 over lower <= p <= upper, where lower <= 0 <= upper; equal bounds (both 0) hold a coordinate.
/// H is symmetric and positive definite on the coordinates that can move. Primal active-set method from p = 0 (J. Nocedal,
/// S. J. Wright, Numerical Optimization, 2nd ed. (2006), algorithm 16.3), which ends at the one minimum after finitely many
/// exchanges. Returns false, and a zero step, where H is not positive definite to rounding. Allocates nothing.
bool minimise_in_box(const Vector& gradient, const Matrix& hessian, const Vector& lower, const Vector& upper, BoxStep& out);

/// Solves H_FF d_F = b_F over the coordinates marked in `free`, and leaves the others of d at 0. Returns false where H_FF
/// is not positive definite to rounding.
bool solve_free(const Matrix& hessian, const std::array<bool, kMaxParameters>& free, const Vector& right, Vector& out);

/// Corrects a Fisher information H by what the gradient's change y along the last step s says of the true curvature there:
/// one update of Broyden, Fletcher, Goldfarb and Shanno (Nocedal and Wright (2006), equation 6.19), so that H s = y. Plain
/// scoring converges linearly along the direction where the two matrices differ most, which is where its last step points.
/// Left alone where y's is not within a factor of 4 of s'Hs: far from the minimum the change is no curvature.
void learn_curvature(const Vector& s, const Vector& y, Matrix& hessian);

}  // namespace halfturn::infer
