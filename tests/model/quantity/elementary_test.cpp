// SPDX-License-Identifier: Apache-2.0
#include "model/quantity/elementary.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <random>

#include "tests/support/catch.hpp"

using namespace halfturn::elementary;

// Source: the C library's exp, sin and cos, of which glibc states an error below 1 ulp.
TEST_CASE("exponentials and sines of the vector kernels agree with the C library") {
  std::mt19937_64 random(4);
  std::uniform_real_distribution<double> exponent(-16, 0), unit(-1, 1);
  double worst_exponential = 0, worst_sine = 0;
  for (int i = 0; i < 200000; ++i) {
    const double x = -700 * std::exp(exponent(random));
    worst_exponential = std::max(worst_exponential, std::abs(decaying_exponential(x) / std::exp(x) - 1));
    const double phase = kLargestPhase * unit(random) * std::exp(exponent(random));
    const auto at = sine_cosine(phase);
    worst_sine = std::max({worst_sine, std::abs(at.sine - std::sin(phase)), std::abs(at.cosine - std::cos(phase))});
  }
  CHECK(worst_exponential < 5e-16);
  CHECK(worst_sine < 3e-16);
  CHECK(decaying_exponential(0) == 1);
  CHECK(decaying_exponential(-std::numeric_limits<double>::infinity()) == 0);
  CHECK(std::isnan(decaying_exponential(std::numeric_limits<double>::quiet_NaN())));
}

// Source: the C library's log and log1p in long double (64-bit mantissa).
TEST_CASE("x - 1 - log x agrees with the C library, also where it cancels") {
  std::mt19937_64 random(5);
  std::uniform_real_distribution<double> exponent(-30, 30), unit(-1, 1);
  double worst = 0;
  for (int i = 0; i < 200000; ++i) {
    // Near 1 the offset is what is given exactly, elsewhere y is.
    const bool near = i % 2 == 0;
    const double y = near ? 1.0 + 0.4 * unit(random) * std::exp(-std::abs(exponent(random))) : std::exp(exponent(random));
    const double off = y - 1.0;
    const long double exact = (static_cast<long double>(y) - 1) - std::log(static_cast<long double>(y));
    // Below 1e-4 the reference itself cancels: the series off^2/2 - off^3/3 + off^4/4 is then good to 1e-13.
    const long double x = static_cast<long double>(y) - 1, series = x * x * (0.5L - x / 3 + x * x / 4 - x * x * x / 5 + x * x * x * x / 6);
    const long double truth = std::abs(off) < 1e-3 ? series : exact;
    if (truth > 0) worst = std::max(worst, std::abs(static_cast<double>(excess_over_log(y, off) / truth - 1)));
  }
  // The series leaves off^5: 1e-15 at 1e-3, and long double 5e-20 of 1 over 5e-7.
  CHECK(worst < 2e-15);
  CHECK(excess_over_log(1.0, 0.0) == 0.0);
}
