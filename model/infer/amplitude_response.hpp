// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <limits>

/// How the coupling follows the relative drive amplitude a: Omega = k a / sqrt(1 + q a^2), k the coupling per amplitude where
/// a is small, q the compression. With q = 1/a_s^2 above 0 the output saturates towards k a_s; with q = 0 it is a straight line
/// through zero; below 0 the gain rises. Source: the usual form of gain compression in solid-state amplifiers, C. Rapp, Proc. 2nd
/// European Conference on Satellite Communications, Liege (1991), p. 179, with the smoothness 1 (citation from memory). Its first
/// term, in a^3, is that of any odd response: of an acousto-optic modulator, and of amplifiers whose gain rises before it falls,
/// for which q is let below 0 here. A drive with a threshold of 5 % looks nearly like that as well (recalibrate's amplitude_test).
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
