// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <limits>

/// How the coupling follows the relative drive amplitude a: Omega = k a / sqrt(1 + q a^2), k the coupling per amplitude where
/// a is small, q = 1/a_s^2 the compression, at least 0, a_s the amplitude towards which the output saturates. With q = 0 a
/// straight line through zero. Source: the usual form of gain compression in solid-state amplifiers, C. Rapp, Proc. 2nd
/// European Conference on Satellite Communications, Liege (1991), p. 179, with the smoothness 1 (citation from memory);
/// its first term in a^3 is that of any odd response that compresses, an acousto-optic modulator's among them.
namespace halfturn::infer {

/// a / sqrt(1 + q a^2): the amplitude that a linear drive would need.
inline double compressed(double amplitude, double compression) {
  return amplitude / std::sqrt(1.0 + compression * amplitude * amplitude);
}

/// d compressed / d q.
inline double compressed_by_compression(double amplitude, double compression) {
  const double whole = 1.0 + compression * amplitude * amplitude;
  return -0.5 * amplitude * amplitude * amplitude / (whole * std::sqrt(whole));
}

/// d ln(compressed) / d a, for a > 0.
inline double logarithmic_slope(double amplitude, double compression) {
  return 1.0 / (amplitude * (1.0 + compression * amplitude * amplitude));
}

/// The amplitude whose `compressed` is this; NaN where the drive saturates below it.
inline double expanded(double linear, double compression) {
  const double rest = 1.0 - compression * linear * linear;
  return rest > 0.0 ? linear / std::sqrt(rest) : std::numeric_limits<double>::quiet_NaN();
}

}  // namespace halfturn::infer
