// SPDX-License-Identifier: Apache-2.0
// Every 3j and 6j symbol of small spins against the GNU Scientific Library (gsl_sf_coupling_3j and _6j).
#include <gsl/gsl_sf_coupling.h>

#include <algorithm>
#include <cmath>
#include <random>

#include "model/atom/angular.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::atom;

TEST_CASE("all 3j symbols with spins up to 4") {
  double worst = 0.0;
  long count = 0;
  for (int a = 0; a <= 8; ++a)
    for (int b = 0; b <= 8; ++b)
      for (int c = 0; c <= 8; ++c)
        for (int alpha = -a; alpha <= a; ++alpha)
          for (int beta = -b; beta <= b; ++beta) {
            const int gamma = -alpha - beta;
            if (std::abs(gamma) > c) continue;
            worst = std::max(
                worst, std::abs(wigner_3j(a, b, c, alpha, beta, gamma) - gsl_sf_coupling_3j(a, b, c, alpha, beta, gamma)));
            ++count;
          }
  INFO(count << " symbols, largest difference " << worst);
  CHECK(count > 20000);
  CHECK(worst < 4e-15);  // GSL's own sums of doubles are good to some 1e-15
}

TEST_CASE("all 6j symbols with spins up to 7/2") {
  double worst = 0.0;
  long count = 0;
  for (int a = 0; a <= 7; ++a)
    for (int b = 0; b <= 7; ++b)
      for (int c = 0; c <= 7; ++c)
        for (int d = 0; d <= 7; ++d)
          for (int e = 0; e <= 7; ++e)
            for (int f = 0; f <= 7; ++f) {
              worst = std::max(worst, std::abs(wigner_6j(a, b, c, d, e, f) - gsl_sf_coupling_6j(a, b, c, d, e, f)));
              ++count;
            }
  INFO(count << " symbols, largest difference " << worst);
  CHECK(worst < 4e-15);
}

TEST_CASE("symbols of larger spins drawn at random") {
  std::mt19937 random(20240607);
  std::uniform_int_distribution<int> spin(0, kLargestTwiceSpin);
  double worst_3j = 0.0, worst_6j = 0.0;
  long count_3j = 0, count_6j = 0;
  for (int i = 0; i < 200000; ++i) {
    const int a = spin(random), b = spin(random), c = spin(random), d = spin(random), e = spin(random), f = spin(random);
    if (!is_triangle(a, b, c)) continue;
    const int alpha = a - 2 * (d % (a + 1)), beta = b - 2 * (e % (b + 1));
    worst_3j = std::max(worst_3j, std::abs(wigner_3j(a, b, c, alpha, beta, -alpha - beta) -
                                           gsl_sf_coupling_3j(a, b, c, alpha, beta, -alpha - beta)));
    ++count_3j;
    if (!is_triangle(a, e, f) || !is_triangle(d, b, f) || !is_triangle(d, e, c)) continue;
    worst_6j = std::max(worst_6j, std::abs(wigner_6j(a, b, c, d, e, f) - gsl_sf_coupling_6j(a, b, c, d, e, f)));
    ++count_6j;
  }
  INFO(count_3j << " and " << count_6j << " symbols, largest differences " << worst_3j << " and " << worst_6j);
  CHECK(count_3j > 10000);
  CHECK(count_6j > 1000);
  CHECK(worst_3j < 1e-12);  // GSL loses digits in its sums here
  CHECK(worst_6j < 1e-12);
}
