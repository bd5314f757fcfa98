// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <random>

/// What differs from shot to shot or from atom to atom, drawn one member at a time from how the member comes about.
namespace halfturn::rehearse {

using Random = std::mt19937_64;

/// A generator for one purpose of one run: the same seed and purpose give the same numbers, different ones are unrelated.
Random seeded(std::uint64_t seed, std::uint32_t purpose);

/// Spreads that act together; a spread of 0 is none.
struct Ensemble {
  double rabi_spread = 0;          // Gaussian, standard deviation over mean
  double detuning_spread_hz = 0;   // Gaussian, standard deviation
  double cloud_ratio = 0;          // sigma of a Gaussian cloud over the 1/e^2 intensity radius of a Gaussian beam
  bool rabi_follows_intensity = false;  // as in a two-photon drive; else the field
  double lamb_dicke = 0;           // of one motional mode
  double mean_phonons = 0;         // of its thermal state
  bool none() const;
};

/// What one member sees: its coupling over the peak, bare one, and its detuning less the mean one.
struct Member {
  double rabi_scale = 1;
  double detuning_hz = 0;
};

/// Draws a member. A cloud is drawn by positions in the two directions across the beam; a motional state by its phonon number,
/// whose carrier coupling is exp(-eta^2/2) L_n(eta^2) (Leibfried et al., Rev. Mod. Phys. 75, 281 (2003), eq. 70).
Member draw_member(const Ensemble& ensemble, Random& random);

}  // namespace halfturn::rehearse
