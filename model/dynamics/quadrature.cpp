// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/quadrature.hpp"

#include <cmath>
#include <numbers>

namespace halfturn::dynamics::detail {
namespace {

struct Legendre {
  double value, slope;
};

Legendre legendre(std::size_t degree, double x) {
  double before = 1, value = x;
  for (std::size_t k = 1; k < degree; ++k) {
    const double order = static_cast<double>(k);
    const double next = x * value + (x * value - before) * (order / (order + 1));
    before = value;
    value = next;
  }
  return {value, static_cast<double>(degree) * (before - x * value) / ((1 - x) * (1 + x))};
}

// Rules of Gauss and Hermite for weight exp(-h^2/2)/sqrt(2 pi), from scipy.special.roots_hermitenorm (SciPy 1.10), whose
// even moments below order 2n they reproduce to 1.5e-14.
constexpr double kNode4[] = {0.7419637843027259, 2.3344142183389773};
constexpr double kWeight4[] = {0.4541241452319315, 0.045875854768068554};
constexpr double kNode8[] = {0.5390798113513752, 1.6365190424351082, 2.8024858612875416, 4.1445471861258945};
constexpr double kWeight8[] = {0.3730122576790773, 0.11723990766175899, 0.009635220120788292, 0.00011261453837536736};
constexpr double kNode12[] = {0.44440300194413895, 1.3403751971516167, 2.2594644510007993,
                              3.2237098287700974,  4.2718258479322815, 5.500901704467748};
constexpr double kWeight12[] = {0.32166436151282995,   0.14696704804532995,    0.029116687912364176,
                                0.0022033806875331975, 4.8371849225906185e-05, 1.4999271676371613e-07};
constexpr double kNode16[] = {0.3867606045005573, 1.1638291005549648, 1.9519803457163336, 2.7602450476307014,
                              3.600873624171548,  4.492955302520011,  5.472225705949343,  6.630878198393129};
constexpr double kWeight16[] = {0.2865685212380122,    0.15833837275094964,    0.04728475235401394,   0.007266937601184714,
                                0.0005259849265739187, 1.5300032162487523e-05, 1.3094732162867914e-07, 1.4978147231618105e-10};

}  // namespace

void legendre_rule(std::size_t points, LegendreRule& rule) {
  if (rule.node.size() == points) return;
  rule.node.resize(points);
  rule.weight.resize(points);
  const double n = static_cast<double>(points);
  for (std::size_t i = 0; 2 * i < points; ++i) {
    double x = (1 - (n - 1) / (8 * n * n * n)) * std::cos(std::numbers::pi * (4 * static_cast<double>(i) + 3) / (4 * n + 2));
    for (int step = 0; step < 3; ++step) {  // the estimate is good to 1/n^4, and each step squares the error
      const Legendre at = legendre(points, x);
      x -= at.value / at.slope;
    }
    const double slope = legendre(points, x).slope, weight = 1 / ((1 - x) * (1 + x) * slope * slope);
    rule.node[i] = 0.5 * (1 - x);
    rule.node[points - 1 - i] = 0.5 * (1 + x);
    rule.weight[i] = rule.weight[points - 1 - i] = weight;
  }
}

// Where errors reach 1e-11 of cos(a h), or 1e-10 of h sin(a h), against exp(-a^2/2) and its derivative: a = 0.080, 0.688,
// 1.490, 2.295 (computed in steps of 0.001).
NormalRule normal_rule(double phase) {
  if (phase <= 0.08) return {kNode4, kWeight4, 2};
  if (phase <= 0.688) return {kNode8, kWeight8, 4};
  if (phase <= 1.49) return {kNode12, kWeight12, 6};
  if (phase <= 2.295) return {kNode16, kWeight16, 8};
  return {nullptr, nullptr, 0};
}

}  // namespace halfturn::dynamics::detail
