// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <span>

#include "model/dynamics/modes.hpp"

/// The modes' time courses over a scan, and their sums.
namespace halfturn::dynamics::detail {

/// A grid of effective lengths t_k = first + k step where even; else the lengths themselves are used.
struct Grid {
  bool even = false;
  double step = 0;
};

/// Even where every length lies within 2 ulp of the longest of first + k step, step > 0.
Grid find_grid(std::span<const double> length_s);

/// Four arrays of `points` each: b_i(t_k) of modes.hpp.
struct Basis {
  double* b[4];
};

/// On the even grid first + k step, by a recurrence eight points wide that starts afresh every 512 points.
void basis_even(const Modes& modes, double first, double step, std::size_t points, const Basis& basis);

/// On any lengths t >= 0.
void basis_any(const Modes& modes, const double* t, std::size_t points, const Basis& basis);

/// out_k = offset + sum over i of (constant_i + linear_i t_k) b_i(t_k).
void combine(const Modes& modes, int row, const double* t, const Basis& basis, std::size_t points, double* out);

/// Whether every number is finite.
bool all_finite(const double* values, std::size_t count);

}  // namespace halfturn::dynamics::detail
