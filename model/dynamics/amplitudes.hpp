// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>

#include "model/quantity/clones.hpp"
#include "model/dynamics/modes.hpp"

// With s the Laplace variable, x = s + g, k = G + L, h = x^2 + D^2 and M = (W^2/2) x, eliminating u and v gives
//     rho_ee(s) = (h s e0 + M)/X,   rho_gg(s) = (h ((s + k) q0 + G e0) + M)/X,   X = h s (s + k) + M (2 s + L),
// with e0 + q0 = 1. (For L = 0, X/s is Torrey's cubic.) At D = 0 the coherence u decouples: x divides everything, and
// h = x, M = W^2/2 serve instead. A population n(s)/X(s) with simple roots r has modes n(r)/X'(r) exp(r t); its derivative
// by a parameter, (n_p X - n X_p)/X^2, has double poles: amplitudes (constant + linear t).
namespace halfturn::dynamics::detail {

struct Complex {
  double re = 0, im = 0;
  Complex() = default;
  Complex(double r) : re(r) {}
  Complex(double r, double i) : re(r), im(i) {}
};
HALFTURN_INLINE Complex operator+(Complex a, Complex b) { return {a.re + b.re, a.im + b.im}; }
HALFTURN_INLINE Complex operator-(Complex a, Complex b) { return {a.re - b.re, a.im - b.im}; }
HALFTURN_INLINE Complex operator*(Complex a, Complex b) { return {a.re * b.re - a.im * b.im, a.re * b.im + a.im * b.re}; }
HALFTURN_INLINE Complex operator*(double a, Complex b) { return {a * b.re, a * b.im}; }
HALFTURN_INLINE double inverse(double a) { return 1 / a; }
HALFTURN_INLINE Complex inverse(Complex a) {
  const double size = 1 / (a.re * a.re + a.im * a.im);
  return {a.re * size, -a.im * size};
}

/// One root, seen as a pole: the root r, x = r + g, 1/X'(r) and X''(r)/X'(r).
template <class S>
struct Pole {
  S root, x, inverse_slope, curvature;
};

/// The amplitudes of one mode, row by row, and the magnitudes of the terms that each constant is the sum of.
template <class S>
struct Amplitudes {
  S constant[kRowCount];
  S linear[kRowCount];
  double size[kRowCount];
};

HALFTURN_INLINE double magnitude(double a) { return std::abs(a); }
HALFTURN_INLINE double magnitude(Complex a) { return std::abs(a.re) + std::abs(a.im); }

/// What the numerator n = h (share (s + shift) + fed) + M holds of the start and of what is read.
struct Numerator {
  double share, shift, fed;
  double by_decay, by_loss;  // derivatives of share (s + shift) + fed, by decay and by loss
  double sign;               // of the population read
};

HALFTURN_INLINE Numerator numerator(const Problem& p) {
  if (!p.bright) return {p.excited, 0, 0, 0, 0, 1};
  return {p.ground, p.leaving, p.decay * p.excited, p.ground + p.excited, p.ground, -1};
}

/// All rows of one mode. kResonant: D = 0, with the factor x left out.
template <bool kResonant, class S>
HALFTURN_INLINE Amplitudes<S> amplitudes(const Problem& p, double detuning, const Numerator& of, const Pole<S>& pole) {
  const double half = 0.5 * p.rabi * p.rabi;
  const S s = pole.root, x = pole.x;
  // h and M, their slopes in s (which are also their derivatives by g), and their derivatives by D and W.
  const S h = kResonant ? x : x * x + S(detuning * detuning);
  const S h_s = kResonant ? S(1) : 2.0 * x;
  const double h_ss = kResonant ? 0 : 2, h_d = kResonant ? 0 : 2 * detuning;
  const S m = kResonant ? S(half) : half * x, m_w = kResonant ? S(p.rabi) : p.rabi * x;
  const double m_s = kResonant ? 0 : half, m_ws = kResonant ? 0 : p.rabi;
  const S t = s * (s + S(p.leaving)), t_s = 2.0 * s + S(p.leaving), u = 2.0 * s + S(p.loss);  // X = h t + M u
  const S z = of.share * (s + S(of.shift)) + S(of.fed);                                         // n = h z + M
  const S n = h * z + m, n_s = h_s * z + of.share * h + S(m_s);
  const S inv = pole.inverse_slope, amplitude = n * inv, slope = inv * n_s;

  struct Pair {
    S constant, linear;
    double size;
  };
  // The derivative of n/X' exp(r t) by a parameter, from those of n, X and X' by it.
  const auto derivative = [&](const S& n_p, const S& chi_p, const S& chi_ps) HALFTURN_INLINE_LAMBDA {
    const S shift = inv * chi_p;  // minus the derivative of the root
    const S a = inv * n_p, b = slope * shift, c = amplitude * (inv * chi_ps), d = amplitude * (shift * pole.curvature);
    const double size = magnitude(a) + magnitude(b) + magnitude(c) + magnitude(d);
    return Pair{of.sign * (a - b - c + d), (-of.sign) * (amplitude * shift), size};
  };
  const Pair by_coherence = derivative(h_s * z + S(m_s), h_s * t + m_s * u, h_ss * t + h_s * t_s + S(2 * m_s));
  const S chi_k = h * s, chi_ks = h_s * s + h;  // by k = G + L

  Amplitudes<S> result;
  const auto set = [&](int rate, const Pair& by, double coherence_share) HALFTURN_INLINE_LAMBDA {
    result.constant[kRateRow + rate] = by.constant + coherence_share * by_coherence.constant;
    result.linear[kRateRow + rate] = by.linear + coherence_share * by_coherence.linear;
    result.size[kRateRow + rate] = by.size + coherence_share * by_coherence.size;
  };
  set(kByRabi, derivative(m_w, m_w * u, m_ws * u + 2.0 * m_w), 0);
  set(kByDetuning, derivative(h_d * z, h_d * t, h_d * t_s), 0);
  set(kByDecay, derivative(of.by_decay * h, chi_k, chi_ks), 0.5);
  set(kByLoss, derivative(of.by_loss * h, chi_k + m, chi_ks + S(m_s)), 0.5);
  set(kByDephasing, by_coherence, 0);
  result.constant[kValueRow] = of.sign * amplitude;
  result.constant[kLengthRow] = of.sign * (amplitude * s);
  result.linear[kValueRow] = result.linear[kLengthRow] = S(0);
  result.size[kValueRow] = magnitude(amplitude);
  result.size[kLengthRow] = magnitude(result.constant[kLengthRow]);
  return result;
}

}  // namespace halfturn::dynamics::detail
