// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <string_view>

#include "model/quantity/result.hpp"

/// Angular momentum. Every spin and projection is handed over doubled, so that 3/2 is 3.
namespace halfturn::atom {

/// The largest doubled spin for which the symbols below keep their accuracy; above it they return NaN.
inline constexpr int kLargestTwiceSpin = 20;

/// Wigner's 3j symbol (j1 j2 j3; m1 m2 m3), all arguments doubled. 0 where a selection rule makes it vanish (triangle,
/// projections, whole sums). |error| < 1e-15 for doubled spins up to kLargestTwiceSpin, NaN above.
/// Racah's single sum (Phys. Rev. 62, 438 (1942)) with its factorials gathered into binomials, whose alternating sum is
/// then exact in whole numbers (Wei, Comput. Phys. Commun. 120, 222 (1999)).
double wigner_3j(int twice_j1, int twice_j2, int twice_j3, int twice_m1, int twice_m2, int twice_m3);

/// Wigner's 6j symbol {j1 j2 j3; j4 j5 j6}, all arguments doubled. 0 where one of the four triads is no triangle.
/// |error| < 1e-15 for doubled spins up to kLargestTwiceSpin, NaN above. Same sources.
double wigner_6j(int twice_j1, int twice_j2, int twice_j3, int twice_j4, int twice_j5, int twice_j6);

/// Whether |a - b| <= c <= a + b with a whole sum, all doubled: whether spins a and b can couple to c.
bool is_triangle(int twice_a, int twice_b, int twice_c);

/// The matrix element <F m|e r|F' m'> of one component of the dipole in units of the reduced element <J||er||J'> in
/// Steck's normalisation, with its sign; all arguments doubled. `twice_I` = 0 (with F = J, F' = J') serves atoms without
/// hyperfine structure. The component is the one that takes m to m'; 0 where |m' - m| > 1 or a triangle is broken.
/// D. A. Steck, "Rubidium 87 D Line Data", equations for <F m|er_q|F' m'> and <F||er||F'> (his q is m - m').
double hyperfine_factor(int twice_I, int twice_J, int twice_F, int twice_m, int twice_J_upper, int twice_F_upper,
                        int twice_m_upper);

/// Steck's relative hyperfine strength S_FF' = (2F'+1)(2J+1) {J J' 1; F' F I}^2; summed over F' it is 1.
double hyperfine_strength(int twice_I, int twice_J, int twice_F, int twice_J_upper, int twice_F_upper);

/// A spin or projection as people write it: 3 gives `3/2`, -4 gives `-2`.
std::string half_text(int twice);

/// The reverse, doubled: `3/2` gives 3, `-2` gives -4, `+1/2` gives 1. Fault `bad_value` at `where` for anything else, and
/// for numbers beyond 50.
Result<int> read_half(std::string_view text, const std::string& where);

}  // namespace halfturn::atom
