// SPDX-License-Identifier: Apache-2.0
#pragma once

/// Dipole moments and spontaneous decay. Rates are Gamma / 2 pi in Hz, as linewidths.
namespace halfturn::atom {

/// |d| of a two-level pair whose upper state decays to its lower state alone at `linewidth_hz`, in C m:
/// Gamma = omega^3 d^2 / (3 pi epsilon_0 hbar c^3) (Weisskopf & Wigner 1930). Both > 0.
double two_level_dipole_C_m(double frequency_hz, double linewidth_hz);

/// The reverse, in Hz.
double two_level_linewidth_hz(double frequency_hz, double dipole_C_m);

/// d_S = <J||er||J'> in Steck's normalisation from the linewidth by decay J' -> J, in C m:
/// Gamma = omega^3 / (3 pi epsilon_0 hbar c^3) (2J+1)/(2J'+1) d_S^2 (Steck, "Rubidium 87 D Line Data", section on
/// lifetimes).
double reduced_dipole_C_m(double frequency_hz, double partial_linewidth_hz, int twice_J, int twice_J_upper);

/// The reverse, in Hz.
double partial_linewidth_hz(double frequency_hz, double reduced_dipole_C_m, int twice_J, int twice_J_upper);

}  // namespace halfturn::atom
