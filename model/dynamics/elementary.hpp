// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <bit>
#include <cstdint>

#include "model/dynamics/clones.hpp"

/// exp, sin and cos written so that a loop over them becomes vector instructions, which calls into libm do not.
namespace halfturn::dynamics::detail {

inline constexpr double kRoundingShift = 6755399441055744.0;  // 1.5 * 2^52: adding it rounds to a whole number
inline constexpr double kLargestPhase = 1e6;                  // rad, up to which sine_cosine serves

/// exp(x) for x <= 0; below -700 it is 0. |relative error| < 5e-16 (elementary_test.cpp, against libm).
/// Method: x = n ln 2 + r, |r| <= ln 2/2, Taylor series of degree 13; ln 2 in two parts (W. J. Cody and W. Waite, Software
/// Manual for the Elementary Functions (1980), ch. 6).
HALFTURN_INLINE double decaying_exponential(double x) {
  constexpr double kLogHigh = 6.93147180369123816490e-01, kLogLow = 1.90821492927058770002e-10;
  const double clipped = x > -700.0 ? x : -700.0;
  const double shifted = clipped * 1.4426950408889634 + kRoundingShift;
  const double whole = shifted - kRoundingShift;
  const double r = (clipped - whole * kLogHigh) - whole * kLogLow;
  double sum = 1.0 / 6227020800.0;
  sum = sum * r + 1.0 / 479001600.0;
  sum = sum * r + 1.0 / 39916800.0;
  sum = sum * r + 1.0 / 3628800.0;
  sum = sum * r + 1.0 / 362880.0;
  sum = sum * r + 1.0 / 40320.0;
  sum = sum * r + 1.0 / 5040.0;
  sum = sum * r + 1.0 / 720.0;
  sum = sum * r + 1.0 / 120.0;
  sum = sum * r + 1.0 / 24.0;
  sum = sum * r + 1.0 / 6.0;
  sum = sum * r + 0.5;
  sum = sum * (r * r) + r;
  // The low bits of `shifted` hold n; moved into the exponent field they make 2^n.
  const double power = std::bit_cast<double>((std::bit_cast<std::uint64_t>(shifted) + 1023u) << 52);
  const double value = power + power * sum;
  return x > -700.0 ? value : (x == x ? 0.0 : x);
}

struct SineCosine {
  double sine, cosine;
};

/// sin x and cos x for |x| <= kLargestPhase. |error| < 3e-16 (elementary_test.cpp, against libm).
/// Method: x = n pi/2 + r, |r| <= pi/4, with pi/2 in three parts of at most 33 bits (as Cody and Waite, ch. 8; the parts are
/// those of fdlibm's e_rem_pio2.c, Sun Microsystems 1993), Taylor series of degree 17 and 18.
HALFTURN_INLINE SineCosine sine_cosine(double x) {
  const double shifted = x * 0.63661977236758134308 + kRoundingShift;
  const double whole = shifted - kRoundingShift;
  const double r = ((x - whole * 1.57079632673412561417e+00) - whole * 6.07710050630396597660e-11) -
                   whole * 2.02226624879595063154e-21;
  const double q = r * r;
  double s = 1.0 / 355687428096000.0;
  s = s * q - 1.0 / 1307674368000.0;
  s = s * q + 1.0 / 6227020800.0;
  s = s * q - 1.0 / 39916800.0;
  s = s * q + 1.0 / 362880.0;
  s = s * q - 1.0 / 5040.0;
  s = s * q + 1.0 / 120.0;
  s = s * q - 1.0 / 6.0;
  s = r + r * q * s;
  double c = -1.0 / 6402373705728000.0;
  c = c * q + 1.0 / 20922789888000.0;
  c = c * q - 1.0 / 87178291200.0;
  c = c * q + 1.0 / 479001600.0;
  c = c * q - 1.0 / 3628800.0;
  c = c * q + 1.0 / 40320.0;
  c = c * q - 1.0 / 720.0;
  c = c * q + 1.0 / 24.0;
  c = (1.0 - 0.5 * q) + q * q * c;
  const std::uint64_t quadrant = std::bit_cast<std::uint64_t>(shifted);
  const bool swapped = (quadrant & 1u) != 0;
  const std::uint64_t sine_sign = (quadrant & 2u) << 62, cosine_sign = ((quadrant + 1u) & 2u) << 62;
  const double sine = swapped ? c : s, cosine = swapped ? s : c;
  return {std::bit_cast<double>(std::bit_cast<std::uint64_t>(sine) ^ sine_sign),
          std::bit_cast<double>(std::bit_cast<std::uint64_t>(cosine) ^ cosine_sign)};
}

}  // namespace halfturn::dynamics::detail
