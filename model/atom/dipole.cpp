// SPDX-License-Identifier: Apache-2.0
#include "model/atom/dipole.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"

namespace halfturn::atom {
namespace {

/// omega^3 / (3 pi epsilon_0 hbar c^3) / 2 pi: linewidth in Hz over squared moment.
double linewidth_per_squared_moment(double frequency_hz) {
  using namespace constants;
  const double wavenumber = kTwoPi * frequency_hz / kSpeedOfLight;
  return wavenumber * wavenumber * wavenumber / (3.0 * kPi * kVacuumPermittivity * kReducedPlanck) / kTwoPi;
}

}  // namespace

double two_level_dipole_C_m(double frequency_hz, double linewidth_hz) {
  return std::sqrt(linewidth_hz / linewidth_per_squared_moment(frequency_hz));
}

double two_level_linewidth_hz(double frequency_hz, double dipole_C_m) {
  return linewidth_per_squared_moment(frequency_hz) * dipole_C_m * dipole_C_m;
}

double reduced_dipole_C_m(double frequency_hz, double partial_linewidth_hz, int twice_J, int twice_J_upper) {
  return two_level_dipole_C_m(frequency_hz, partial_linewidth_hz) * std::sqrt((twice_J_upper + 1.0) / (twice_J + 1.0));
}

double partial_linewidth_hz(double frequency_hz, double reduced_dipole_C_m, int twice_J, int twice_J_upper) {
  return two_level_linewidth_hz(frequency_hz, reduced_dipole_C_m) * (twice_J + 1.0) / (twice_J_upper + 1.0);
}

}  // namespace halfturn::atom
