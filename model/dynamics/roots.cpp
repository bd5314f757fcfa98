// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/roots.hpp"

#include <algorithm>
#include <cmath>
#include <utility>

namespace halfturn::dynamics::detail {
namespace {

struct Slope {
  double value, slope;
};

/// Newton's method inside [low, high], where `f` changes sign from `sign_low` at `low`; a step that leaves the bracket is
/// replaced by bisection.
template <class Function>
double bracketed_newton(const Function& f, double low, double high, bool positive_low, double guess) {
  double at = guess;
  for (int step = 0; step < 100; ++step) {  // 60 bisections reach the last bit; Newton takes 2 to 5
    const Slope here = f(at);
    if (here.value == 0) return at;
    ((here.value > 0) == positive_low ? low : high) = at;
    double next = at - here.value / here.slope;
    if (!(next >= low && next <= high)) next = 0.5 * (low + high);
    const double moved = std::abs(next - at);
    at = next;
    // Convergence is quadratic: a last step of 1e-9 of the root leaves nothing to gain from another.
    if (moved <= 1e-9 * std::abs(at)) return at;
  }
  return at;
}

/// The root between -loss/2 and 0 of c0 + c1 s + c2 s^2 + c3 s^3 + c4 s^4, all coefficients positive.
double slow_root(double c0, double c1, double c2, double c3, double c4, double loss) {
  const auto f = [=](double s) {
    return Slope{c0 + s * (c1 + s * (c2 + s * (c3 + s * c4))), c1 + s * (2 * c2 + s * (3 * c3 + s * 4 * c4))};
  };
  const double inside = c1 * c1 - 4 * c0 * c2;
  const double guess = -2 * c0 / (c1 + std::sqrt(std::max(inside, 0.0)));
  return bracketed_newton(f, -0.5 * loss, 0.0, false, std::clamp(guess, -0.5 * loss, 0.0));
}

/// A root s and its x = s + g, each accurate relative to itself or to g and k.
struct Located {
  double s, x;
};

/// The root between s = -g and s = -k, as one of (x^2 + D^2) s (s + k)/(s + L/2) + W^2 x, which the bracket keeps from its
/// pole. It is sought as a distance from the nearer end of the bracket, so that s stays accurate where k << g.
Located coherence_root(double w2, double d2, double loss, double g, double k) {
  const double end = g - k, half = 0.5 * loss;
  if (end == 0) return {-g, 0};
  const auto f = [=](double s, double x, double s_plus_k) {
    const double pole = 1 / (s + half), ratio = s * s_plus_k * pole;
    const double ratio_s = (s + s_plus_k - ratio) * pole, h = x * x + d2;
    return Slope{h * ratio + w2 * x, 2 * x * ratio + h * ratio_s + w2};
  };
  const double guess = coherence_guess(w2, d2, loss, g, k), middle = 0.5 * end;
  const bool beyond = (f(middle - g, middle, middle - end).value > 0) != (end > 0);  // the root lies between middle and end
  const double low = std::min(0.0, middle), high = std::max(0.0, middle);
  if (beyond) {
    const auto from_end = [=](double y) { return f(y - k, y + end, y); };
    const double y = bracketed_newton(from_end, -high, -low, false, std::clamp(guess - end, -high, -low));
    return {y - k, y + end};
  }
  const auto from_start = [=](double x) { return f(x - g, x, x - end); };
  const double x = bracketed_newton(from_start, low, high, false, std::clamp(guess, low, high));
  return {x - g, x};
}

}  // namespace

Roots find_roots(double rabi, double detuning, double loss, double coherence, double leaving) {
  const double w2 = rabi * rabi, d2 = detuning * detuning, g = coherence, k = leaving;
  Roots roots{};
  if (detuning == 0) {
    roots.singles = 1;
    const double c0 = 0.5 * w2 * loss, c1 = g * k + w2, c2 = g + k;
    const double r = loss == 0 ? 0 : slow_root(c0, c1, c2, 1, 0, loss);
    roots.single[0] = r;
    roots.single_x[0] = r + g;
    roots.pair_sum = c2 + r;
    roots.pair_product = r == 0 ? c1 : -c0 / r;
  } else {
    roots.singles = 2;
    const double c0 = 0.5 * w2 * g * loss, c1 = k * (g * g + d2) + w2 * (g + 0.5 * loss);
    const double c2 = g * g + d2 + 2 * g * k + w2, c3 = 2 * g + k;
    const double r = loss == 0 ? 0 : slow_root(c0, c1, c2, c3, 1, loss);
    const auto [second, x] = coherence_root(w2, d2, loss, g, k);
    roots.single[0] = r;
    roots.single_x[0] = r + g;
    roots.single[1] = second;
    roots.single_x[1] = x;
    roots.pair_sum = c3 + r + second;
    roots.pair_product = r == 0 ? c1 / -second : c0 / (r * second);
  }
  roots.discriminant = 0.25 * roots.pair_sum * roots.pair_sum - roots.pair_product;
  return roots;
}

}  // namespace halfturn::dynamics::detail
