// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <bit>
#include <cstdint>

#include "model/quantity/clones.hpp"

/// exp, sin, cos and log written so that a loop over them becomes vector instructions, which calls into libm do not.
namespace halfturn::elementary {

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

/// y - 1 - log y for y > 0, normal, given also x = y - 1 (to its own precision: near y = 1 the sum y does not hold it). Relative
/// error < 2e-15 (elementary_test.cpp, against libm), also near y = 1, where the terms cancel.
/// Method: y = 2^e m, 1/sqrt 2 < m <= sqrt 2, s = (m - 1)/(m + 1), log m = 2 artanh s by its Taylor series to s^23.
HALFTURN_INLINE double excess_over_log(double y, double x) {
  constexpr std::uint64_t kRootHalf = 0x3fe6a09e667f3bcdu;  // 1/sqrt 2
  constexpr double kLogHigh = 6.93147180369123816490e-01, kLogLow = 1.90821492927058770002e-10;
  constexpr double kWhole = 4503599627370496.0;  // 2^52: added to a small whole number, its low bits are that number
  const std::uint64_t bits = std::bit_cast<std::uint64_t>(y);
  const std::uint64_t biased = (bits - kRootHalf + (std::uint64_t{1} << 62)) >> 52;  // e + 1024, above 0
  const double e = std::bit_cast<double>(biased | 0x4330000000000000u) - kWhole - 1024.0;
  const double m = std::bit_cast<double>(bits - ((biased - 1024u) << 52));
  const bool near = e == 0.0;
  const double off = near ? x : m - 1.0;
  const double s = off / (2.0 + off), q = s * s;
  double sum = 1.0 / 23.0;
  sum = sum * q + 1.0 / 21.0;
  sum = sum * q + 1.0 / 19.0;
  sum = sum * q + 1.0 / 17.0;
  sum = sum * q + 1.0 / 15.0;
  sum = sum * q + 1.0 / 13.0;
  sum = sum * q + 1.0 / 11.0;
  sum = sum * q + 1.0 / 9.0;
  sum = sum * q + 1.0 / 7.0;
  sum = sum * q + 1.0 / 5.0;
  sum = sum * q + 1.0 / 3.0;
  const double tail = 2.0 * s * q * sum;               // 2 artanh s - 2 s
  const double close = 2.0 * q / (1.0 - s) - tail;     // off - 2 s = 2 s^2/(1 - s)
  const double distant = x - e * kLogHigh - (2.0 * s + tail + e * kLogLow);
  return near ? close : distant;
}

}  // namespace halfturn::elementary
