// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/modes.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

#include "model/dynamics/roots.hpp"

// With s the Laplace variable, x = s + g, k = G + L, h = x^2 + D^2 and M = (W^2/2) x, eliminating u and v gives
//     rho_ee(s) = (h s e0 + M)/X,   rho_gg(s) = (h ((s + k) q0 + G e0) + M)/X,   X = h s (s + k) + M (2 s + L),
// with e0 + q0 = 1. (For L = 0, X/s is Torrey's cubic.) At D = 0 the coherence u decouples: x divides everything, and
// h = x, M = W^2/2 serve instead. A population n(s)/X(s) with simple roots r has modes n(r)/X'(r) exp(r t); its derivative
// by a parameter, (n_p X - n X_p)/X^2, has double poles: amplitudes (constant + linear t).
namespace halfturn::dynamics::detail {
namespace {

constexpr double kEpsilon = std::numeric_limits<double>::epsilon();

// The sum of the magnitudes of the modes' amplitudes, times this, is taken as the error of their sum; it is held to a
// hundredth of the stated accuracy of values and a tenth of that of derivatives. Over the 2400 sets of dynamics_expm.py,
// which crowd around double and triple roots, the true error was at most 1.5 times this estimate.
constexpr double kAmplification = 8 * kEpsilon;
constexpr double kValueError = 1e-12;
constexpr double kRateError = 1e-11;  // in units of the longest pulse length

struct Complex {
  double re = 0, im = 0;
  Complex() = default;
  Complex(double r) : re(r) {}
  Complex(double r, double i) : re(r), im(i) {}
};
inline Complex operator+(Complex a, Complex b) { return {a.re + b.re, a.im + b.im}; }
inline Complex operator-(Complex a, Complex b) { return {a.re - b.re, a.im - b.im}; }
inline Complex operator-(Complex a) { return {-a.re, -a.im}; }
inline Complex operator*(Complex a, Complex b) { return {a.re * b.re - a.im * b.im, a.re * b.im + a.im * b.re}; }
inline Complex operator*(double a, Complex b) { return {a * b.re, a * b.im}; }
inline double inverse(double a) { return 1 / a; }
inline Complex inverse(Complex a) {
  const double size = 1 / (a.re * a.re + a.im * a.im);
  return {a.re * size, -a.im * size};
}

/// One root, seen as a pole: the root r, x = r + g, 1/X'(r) and X''(r)/X'(r).
template <class S>
struct Pole {
  S root, x, inverse_slope, curvature;
};

/// The amplitudes of one mode, row by row.
template <class S>
struct Amplitudes {
  S constant[kRowCount];
  S linear[kRowCount];
};

template <class S>
Amplitudes<S> amplitudes(const Problem& p, const Pole<S>& pole) {
  const bool resonant = p.detuning == 0;
  const double half = 0.5 * p.rabi * p.rabi;
  const S s = pole.root, x = pole.x;
  // h and M, their slopes in s, and their derivatives by g, D and W (with slopes in s).
  const S h = resonant ? x : x * x + S(p.detuning * p.detuning);
  const S h_s = resonant ? S(1) : 2.0 * x;                                     // also the derivative of h by g
  const double h_ss = resonant ? 0 : 2;
  const S m = resonant ? S(half) : half * x;
  const double m_s = resonant ? 0 : half;                                      // also the derivative of M by g
  const S m_w = resonant ? S(p.rabi) : p.rabi * x;
  const double m_ws = resonant ? 0 : p.rabi;
  const double h_d = resonant ? 0 : 2 * p.detuning;
  // X = h t + M u
  const S t = s * (s + S(p.leaving)), t_s = 2.0 * s + S(p.leaving), u = 2.0 * s + S(p.loss);
  // n = h z + M
  const S z = p.bright ? p.ground * (s + S(p.leaving)) + S(p.decay * p.excited) : p.excited * s;
  const double z_s = p.bright ? p.ground : p.excited;
  const S n = h * z + m, n_s = h_s * z + z_s * h + S(m_s);
  const S inv = pole.inverse_slope;
  const S amplitude = n * inv;
  const double sign = p.bright ? -1 : 1;

  Amplitudes<S> result;
  struct Pair {
    S constant, linear;
  };
  const auto derivative = [&](S n_p, S chi_p, S chi_ps) {
    const S bracket = n_s * chi_p + n * (chi_ps - chi_p * pole.curvature);
    return Pair{sign * (inv * (n_p - inv * bracket)), (-sign) * (amplitude * (inv * chi_p))};
  };
  const Pair by_rabi = derivative(m_w, m_w * u, m_ws * u + 2.0 * m_w);
  const Pair by_detuning = derivative(h_d * z, h_d * t, h_d * t_s);
  const Pair by_coherence = derivative(h_s * z + S(m_s), h_s * t + m_s * u, h_ss * t + h_s * t_s + S(2 * m_s));
  // k = G + L enters X as h s, z as q0; decay enters z by itself as e0, loss enters X by itself as M.
  const S n_decay = p.bright ? h : S(0), n_loss = p.bright ? p.ground * h : S(0);
  const S chi_k = h * s, chi_ks = h_s * s + h;
  const Pair by_decay = derivative(n_decay, chi_k, chi_ks);  // e0 + q0 = 1
  const Pair by_loss = derivative(n_loss, chi_k + m, chi_ks + S(m_s));

  result.constant[kValueRow] = sign * amplitude;
  result.linear[kValueRow] = S(0);
  const auto set = [&](int rate, const S& constant, const S& linear) {
    result.constant[kRateRow + rate] = constant;
    result.linear[kRateRow + rate] = linear;
  };
  set(kByRabi, by_rabi.constant, by_rabi.linear);
  set(kByDetuning, by_detuning.constant, by_detuning.linear);
  set(kByDecay, by_decay.constant + 0.5 * by_coherence.constant, by_decay.linear + 0.5 * by_coherence.linear);
  set(kByLoss, by_loss.constant + 0.5 * by_coherence.constant, by_loss.linear + 0.5 * by_coherence.linear);
  set(kByDephasing, by_coherence.constant, by_coherence.linear);
  result.constant[kLengthRow] = sign * (amplitude * s);
  result.linear[kLengthRow] = S(0);
  return result;
}

void put(Modes& modes, int slot, const Amplitudes<double>& real) {
  for (int row = 0; row < kRowCount; ++row) {
    modes.constant[row][slot] = real.constant[row];
    modes.linear[row][slot] = real.linear[row];
  }
}

/// A pair of conjugate modes: a exp(r t) + its conjugate = 2 exp(Re r t) (Re a cos - Im a sin).
void put(Modes& modes, const Amplitudes<Complex>& pair) {
  for (int row = 0; row < kRowCount; ++row) {
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

void clear(Modes& modes) { modes = Modes{}; }

void damped(const Problem& p, Modes& modes) {
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
    put(modes, amplitudes(p, pole<Complex>(upper, upper + Complex(p.coherence), others, 1 + singles)));
    for (int i = 0; i < singles; ++i) {
      const double r = roots.single[i], gap = singles == 2 ? r - roots.single[1 - i] : 1;
      const double to_pair = (r - middle) * (r - middle) + spread * spread;
      const double curvature = (singles == 2 ? 2 / gap : 0) + 4 * (r - middle) / to_pair;
      put(modes, i, amplitudes(p, Pole<double>{r, roots.single_x[i], 1 / (gap * to_pair), curvature}));
    }
    return;
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
    put(modes, i < 2 ? i + 2 : i - 2, amplitudes(p, pole<double>(all[i], x, others, count)));
  }
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
}

/// The magnitude that a row's modes reach within the scan, added up without regard to sign.
double reach(const Modes& modes, int row, double longest) {
  double sum = 0;
  for (int i = 0; i < 4; ++i) {
    const double rate = std::abs(modes.rate[i == 3 && modes.oscillates ? 2 : i]);
    sum += std::abs(modes.constant[row][i]) + std::abs(modes.linear[row][i]) * (rate * longest > 1 ? 1 / rate : longest);
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
  clear(modes);
  if (problem.undamped) {
    undamped(problem, modes);
  } else {
    damped(problem, modes);
  }
  modes.offset[kValueRow] = problem.bright && !problem.undamped ? 1 : 0;
  if (!(kAmplification * reach(modes, kValueRow, longest) <= kValueError)) return false;
  for (int row = kRateRow; row < kLengthRow; ++row) {
    if (wanted[row] && !(kAmplification * reach(modes, row, longest) <= kRateError * longest)) return false;
  }
  return true;
}

}  // namespace halfturn::dynamics::detail
