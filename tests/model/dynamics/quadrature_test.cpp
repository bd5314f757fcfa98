// SPDX-License-Identifier: Apache-2.0
#include <cmath>

#include "model/dynamics/quadrature.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::dynamics::detail;

// M. Abramowitz and I. Stegun, Handbook of Mathematical Functions (1964), Table 25.4, n = 8 (from memory), on -1...1.
TEST_CASE("points and weights of Gauss and Legendre have their tabulated values") {
  LegendreRule rule;
  legendre_rule(8, rule);
  const double node[] = {0.183434642495650, 0.525532409916329, 0.796666477413627, 0.960289856497536};
  const double weight[] = {0.362683783378362, 0.313706645877887, 0.222381034453374, 0.101228536290376};
  for (std::size_t i = 0; i < 4; ++i) {
    CHECK(2 * rule.node[4 + i] - 1 == Approx(node[i]).margin(1e-15).epsilon(0));
    CHECK(1 - 2 * rule.node[3 - i] == Approx(node[i]).margin(1e-15).epsilon(0));
    CHECK(2 * rule.weight[4 + i] == Approx(weight[i]).margin(1e-15).epsilon(0));
    CHECK(rule.weight[4 + i] == rule.weight[3 - i]);
  }
}

// The error is of the order of the Bessel function J_2n(c/2): for c = n = 16 it is 1e-17.
TEST_CASE("rules of Gauss and Legendre integrate cosines to sin(c)/c") {
  LegendreRule rule;
  for (std::size_t points : {16, 40, 200, 1000, 4096}) {
    legendre_rule(points, rule);
    for (double c : {1e-3, 1.0, 0.3 * static_cast<double>(points), 1.0 * static_cast<double>(points)}) {
      double sum = 0;
      for (std::size_t i = 0; i < points; ++i) sum += rule.weight[i] * std::cos(c * rule.node[i]);
      INFO(points << " points, c " << c);
      CHECK(sum == Approx(std::sin(c) / c).margin(1e-13).epsilon(0));
    }
  }
}

// The mean of cos(a h) over a standard normal h is exp(-a^2/2), that of h sin(a h) is a exp(-a^2/2).
TEST_CASE("rules for a normal variable hold their errors up to their phases") {
  for (double a = 0; a < 2.295; a += 0.0007) {
    const NormalRule rule = normal_rule(a);
    REQUIRE(rule.count >= 2);
    double cosine = 0, sine = 0, weight = 0;
    for (std::size_t i = 0; i < rule.count; ++i) {
      cosine += 2 * rule.weight[i] * std::cos(a * rule.node[i]);
      sine += 2 * rule.weight[i] * rule.node[i] * std::sin(a * rule.node[i]);
      weight += 2 * rule.weight[i];
    }
    const double expected = std::exp(-0.5 * a * a);
    CHECK(weight == Approx(1).margin(1e-15).epsilon(0));
    CHECK(cosine == Approx(expected).margin(1.01e-11).epsilon(0));
    CHECK(sine == Approx(a * expected).margin(1.01e-10).epsilon(0));
  }
  CHECK(normal_rule(2.3).count == 0);
}
