// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/modes.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

#include "model/dynamics/amplitudes.hpp"
#include "model/dynamics/roots.hpp"

namespace halfturn::dynamics::detail {
namespace {

void put(Modes& modes, int slot, const Amplitudes<double>& real) {
  for (int row = 0; row < kRowCount; ++row) {
    modes.size[row] += real.size[row];
    modes.constant[row][slot] = real.constant[row];
    modes.linear[row][slot] = real.linear[row];
  }
}

/// A pair of conjugate modes: a exp(r t) + its conjugate = 2 exp(Re r t) (Re a cos - Im a sin).
void put(Modes& modes, const Amplitudes<Complex>& pair) {
  for (int row = 0; row < kRowCount; ++row) {
    modes.size[row] += 2 * pair.size[row];
    modes.constant[row][2] = 2 * pair.constant[row].re;
    modes.constant[row][3] = -2 * pair.constant[row].im;
    modes.linear[row][2] = 2 * pair.linear[row].re;
    modes.linear[row][3] = -2 * pair.linear[row].im;
  }
}

/// X' and X''/X' at `root` from the other roots: products of differences keep their accuracy where roots are near.
template <class S>
Pole<S> pole(const S& root, const S& x, const S* others, int count) {
  S slope(1), curvature(0);
  for (int i = 0; i < count; ++i) {
    const S gap = root - others[i];
    slope = slope * gap;
    curvature = curvature + 2.0 * inverse(gap);
  }
  return {root, x, inverse(slope), curvature};
}

/// The largest of |root|/gap: what a relative error of a root is multiplied by in the differences of roots.
double crowding(const Complex* roots, int count) {
  double worst = 0;
  for (int i = 0; i < count; ++i)
    for (int j = 0; j < i; ++j) {
      const Complex a = roots[i], b = roots[j], gap = a - b;
      const double size = std::max(a.re * a.re + a.im * a.im, b.re * b.re + b.im * b.im);
      const double ratio = size / (gap.re * gap.re + gap.im * gap.im);
      if (!(ratio <= worst)) worst = ratio;
    }
  return std::sqrt(worst);
}

template <class S>
Amplitudes<S> amplitudes_of(const Problem& p, const Pole<S>& pole) {
  return p.detuning == 0 ? amplitudes<true>(p, p.detuning, numerator(p), pole)
                         : amplitudes<false>(p, p.detuning, numerator(p), pole);
}

/// Fills in the modes and returns the crowding of their roots.
double damped(const Problem& p, Modes& modes) {
  const Roots roots = find_roots(p.rabi, p.detuning, p.loss, p.coherence, p.leaving);
  const int singles = roots.singles;
  const double middle = -0.5 * roots.pair_sum;  // real part of the pair
  modes.oscillates = roots.discriminant < 0;
  const double spread = std::sqrt(std::abs(roots.discriminant));
  for (int i = 0; i < singles; ++i) modes.rate[i] = roots.single[i];
  if (modes.oscillates) {
    modes.rate[2] = middle;
    modes.frequency = spread;
    const Complex upper(middle, spread);
    const Complex others[3] = {Complex(middle, -spread), Complex(roots.single[0]), Complex(roots.single[1])};
    put(modes, amplitudes_of(p, pole<Complex>(upper, upper + Complex(p.coherence), others, 1 + singles)));
    for (int i = 0; i < singles; ++i) {
      const double r = roots.single[i], gap = singles == 2 ? r - roots.single[1 - i] : 1;
      const double to_pair = (r - middle) * (r - middle) + spread * spread;
      const double curvature = (singles == 2 ? 2 / gap : 0) + 4 * (r - middle) / to_pair;
      put(modes, i, amplitudes_of(p, Pole<double>{r, roots.single_x[i], 1 / (gap * to_pair), curvature}));
    }
    const Complex all[4] = {upper, others[0], others[1], others[2]};
    return crowding(all, 2 + singles);
  }
  // Two real roots: the larger in magnitude without cancellation, the other from their product.
  const double fast = middle - spread, slow = fast == 0 ? 0 : roots.pair_product / fast;
  modes.rate[2] = fast;
  modes.rate[3] = slow;
  const double all[4] = {fast, slow, roots.single[0], roots.single[1]};
  for (int i = 0; i < 2 + singles; ++i) {
    double others[3];
    int count = 0;
    for (int j = 0; j < 2 + singles; ++j)
      if (j != i) others[count++] = all[j];
    const double x = i < 2 ? all[i] + p.coherence : roots.single_x[i - 2];
    const int slot = i < 2 ? i + 2 : i - 2;
    put(modes, slot, amplitudes_of(p, pole<double>(all[i], x, others, count)));
  }
  const Complex spread_out[4] = {all[0], all[1], all[2], all[3]};
  return crowding(spread_out, 2 + singles);
}

/// No damping: X = s^2 (s^2 + w^2), w^2 = W^2 + D^2. In y = s^2, the population is c/s + (e0 - c) s/(y + w^2) and every
/// derivative by a damping is N(y)/(y (y + w^2)^2), N of second degree, so a t + (b/w) sin(w t) + c (sin - w t cos)/(2 w^3).
void undamped(const Problem& p, Modes& modes) {
  const double w2 = p.rabi * p.rabi + p.detuning * p.detuning, w = std::sqrt(w2), half = 0.5 * p.rabi * p.rabi;
  const double d2 = p.detuning * p.detuning, tilt = 1 - 2 * p.excited;
  modes.oscillates = true;
  modes.frequency = w;
  const double depth = 0.5 * tilt * p.rabi * p.rabi / w2;
  modes.constant[kValueRow][0] = p.excited + depth;
  modes.constant[kValueRow][2] = -depth;
  modes.constant[kLengthRow][3] = depth * w;
  const double depth_by_rabi = tilt * p.rabi * d2 / (w2 * w2), depth_by_detuning = -tilt * p.detuning * p.rabi * p.rabi / (w2 * w2);
  modes.constant[kRateRow + kByRabi][0] = depth_by_rabi;
  modes.constant[kRateRow + kByRabi][2] = -depth_by_rabi;
  modes.linear[kRateRow + kByRabi][3] = depth * p.rabi / w;
  modes.constant[kRateRow + kByDetuning][0] = depth_by_detuning;
  modes.constant[kRateRow + kByDetuning][2] = -depth_by_detuning;
  modes.linear[kRateRow + kByDetuning][3] = depth * p.detuning / w;

  struct Quadratic {
    double n0 = 0, n1 = 0, n2 = 0;
  };
  const auto product = [](double a0, double a1, double b0, double b1) {
    return Quadratic{a0 * b0, a0 * b1 + a1 * b0, a1 * b1};
  };
  const auto minus = [](Quadratic a, Quadratic b) { return Quadratic{a.n0 - b.n0, a.n1 - b.n1, a.n2 - b.n2}; };
  // n/s = z1 (y + D^2) + W^2/2, with z1 the start's share of the level looked at
  const double share = p.bright ? p.ground : p.excited, sign = p.bright ? -1 : 1;
  const double n0 = share * d2 + half, n1 = share;
  const Quadratic zero;
  const Quadratic by_coherence = minus(product(half, 2 * share, w2, 1), product(n0, n1, 2 * half, 2));
  const Quadratic leaving = product(n0, n1, d2, 1), lost = product(n0, n1, half, 0), fed = product(d2, 1, w2, 1);
  const Quadratic by_decay = minus(p.bright ? fed : zero, leaving);  // q0 + e0 = 1 times fed
  Quadratic by_loss = minus(minus(zero, leaving), lost);
  if (p.bright) by_loss = {by_loss.n0 + p.ground * fed.n0, by_loss.n1 + p.ground * fed.n1, by_loss.n2 + p.ground * fed.n2};
  const auto put_row = [&](int rate, Quadratic n, double coherence_share) {
    n = {n.n0 + coherence_share * by_coherence.n0, n.n1 + coherence_share * by_coherence.n1,
         n.n2 + coherence_share * by_coherence.n2};
    const double a = n.n0 / (w2 * w2), b = n.n2 - a, c = -(n.n0 / w2 - n.n1 + n.n2 * w2);
    modes.linear[kRateRow + rate][0] = sign * a;
    modes.constant[kRateRow + rate][3] = sign * (b / w + 0.5 * c / (w2 * w));
    modes.linear[kRateRow + rate][2] = -sign * 0.5 * c / w2;
  };
  put_row(kByDecay, by_decay, 0.5);
  put_row(kByLoss, by_loss, 0.5);
  put_row(kByDephasing, zero, 1);
  for (int row = 0; row < kRowCount; ++row)
    for (double amplitude : modes.constant[row]) modes.size[row] += std::abs(amplitude);
}

/// The magnitude that a row's modes reach within the scan, added up without regard to sign.
double reach(const Modes& modes, int row, double longest) {
  double sum = modes.size[row];
  for (int i = 0; i < 4; ++i) {
    const double rate = std::abs(modes.rate[i == 3 && modes.oscillates ? 2 : i]);
    sum += std::abs(modes.linear[row][i]) * (rate * longest > 1 ? 1 / rate : longest);
  }
  return sum;
}

}  // namespace

bool pose(const Rates& r, const Start& start, Problem& p) {
  p.rabi = r.rabi;
  p.detuning = r.detuning;
  p.decay = r.decay;
  p.loss = r.loss;
  p.leaving = r.decay + r.loss;
  p.coherence = 0.5 * p.leaving + r.dephasing;
  p.excited = start.prepared == Prepared::excited ? 1 - start.impurity : start.impurity;
  p.ground = start.prepared == Prepared::excited ? start.impurity : 1 - start.impurity;
  p.bright = start.lost_reads == LostReads::bright;
  p.undamped = r.decay == 0 && r.loss == 0 && r.dephasing == 0;
  return r.decay >= 0 && r.loss >= 0 && r.dephasing >= 0 && std::isfinite(r.rabi) && std::isfinite(r.detuning) &&
         std::isfinite(p.coherence) && std::isfinite(start.impurity);
}

bool decompose(const Problem& problem, const Wanted& wanted, double longest, Modes& modes) {
  modes = Modes{};
  double crowded = 1;
  if (problem.undamped) {
    undamped(problem, modes);
  } else {
    crowded = damped(problem, modes);
  }
  const double amplification = kAmplification * crowded;
  modes.offset[kValueRow] = problem.bright && !problem.undamped ? 1 : 0;
  if (!(amplification * reach(modes, kValueRow, longest) <= kValueError)) return false;
  for (int row = kRateRow; row < kLengthRow; ++row) {
    if (wanted[row] && !(amplification * reach(modes, row, longest) <= kRateError * longest)) return false;
  }
  return true;
}

}  // namespace halfturn::dynamics::detail
