// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <numbers>

/// Fundamental constants: CODATA 2022 recommended values (Mohr, Newell, Taylor, Tiesinga, Rev. Mod. Phys. 97, 025002
/// (2025)); the first four are exact in the SI of 2019.
namespace halfturn::constants {

inline constexpr double kPi = std::numbers::pi;
inline constexpr double kTwoPi = 2.0 * std::numbers::pi;

inline constexpr double kSpeedOfLight = 299792458.0;                             // m/s, exact
inline constexpr double kPlanck = 6.62607015e-34;                                // J s, exact
inline constexpr double kReducedPlanck = kPlanck / kTwoPi;                       // J s, exact
inline constexpr double kElementaryCharge = 1.602176634e-19;                     // C, exact
inline constexpr double kBoltzmann = 1.380649e-23;                               // J/K, exact
inline constexpr double kVacuumPermittivity = 8.8541878188e-12;                  // F/m, 1.6e-10 relative
inline constexpr double kBohrRadius = 5.29177210544e-11;                         // m, 1.6e-10 relative
inline constexpr double kElectronMass = 9.1093837139e-31;                        // kg, 3.1e-10 relative
inline constexpr double kBohrMagneton = 9.2740100657e-24;                        // J/T, 3.1e-10 relative
inline constexpr double kDipoleAtomicUnit = kElementaryCharge * kBohrRadius;     // C m, e a0

}  // namespace halfturn::constants
