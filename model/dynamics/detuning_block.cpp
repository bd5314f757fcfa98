// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/detuning_block.hpp"

#include <cmath>

#include "model/dynamics/amplitudes.hpp"
#include "model/quantity/clones.hpp"
#include "model/quantity/elementary.hpp"
#include "model/dynamics/roots.hpp"

namespace halfturn::dynamics::detail {

using namespace elementary;

namespace {

// Steps of Newton's method, from the guesses of roots.hpp; what has not settled to 1e-9 by then is doubtful.
constexpr int kSteps = 5;
constexpr double kSettled = 1e-9;

HALFTURN_INLINE double larger(double a, double b) { return a > b ? a : b; }
HALFTURN_INLINE double smaller(double a, double b) { return a < b ? a : b; }

struct Search {
  double root, unsettled;
};

template <class Function>
HALFTURN_INLINE Search newton(const Function& step, double low, double high, double guess) {
  double at = smaller(larger(guess, low), high), moved = 0;
  for (int i = 0; i < kSteps; ++i) {
    const double next = smaller(larger(at - step(at), low), high);
    moved = std::abs(next - at);
    at = next;
  }
  return {at, moved <= kSettled * std::abs(at) ? 0.0 : 1.0};
}

/// The sums over modes, row by row, and the magnitudes they are made of.
struct Sums {
  double value[kRowCount], size[kRowCount];
};

HALFTURN_INLINE void add(Sums& sums, const Amplitudes<double>& mode, double rate, double t) {
  const double decayed = decaying_exponential(smaller(rate, 0.0) * t), time = 1 / (1 / t + std::abs(rate));
  for (int row = 0; row < kRowCount; ++row) {
    sums.value[row] += (mode.constant[row] + mode.linear[row] * t) * decayed;
    sums.size[row] += mode.size[row] + std::abs(mode.linear[row]) * time;
  }
}

HALFTURN_INLINE void add(Sums& sums, const Amplitudes<Complex>& mode, double rate, double frequency, double t) {
  const double decayed = 2 * decaying_exponential(smaller(rate, 0.0) * t), time = 1 / (1 / t + std::abs(rate));
  const SineCosine at = sine_cosine(frequency * t);
  const double cosine = decayed * at.cosine, sine = decayed * at.sine;
  for (int row = 0; row < kRowCount; ++row) {
    const Complex a = mode.constant[row] + t * mode.linear[row];
    sums.value[row] += a.re * cosine - a.im * sine;
    sums.size[row] += 2 * (mode.size[row] + magnitude(mode.linear[row]) * time);
  }
}

}  // namespace

HALFTURN_CLONES void slow_roots(const Problem& problem, DetuningBlock& block) {
  const int count = block.count;
  const Problem p = problem;  // a copy, which stores into the block cannot change
  const double w2 = p.rabi * p.rabi, g = p.coherence, k = p.leaving, half = 0.5 * p.loss;
  const double c0 = w2 * g * half, c3 = 2 * g + k;
  for (int i = 0; i < count; ++i) {
    const double h0 = g * g + block.detuning[i] * block.detuning[i];
    const double c1 = k * h0 + w2 * (g + half), c2 = h0 + 2 * g * k + w2;
    const auto step = [=](double s) HALFTURN_INLINE_LAMBDA {
      return (c0 + s * (c1 + s * (c2 + s * (c3 + s)))) / (c1 + s * (2 * c2 + s * (3 * c3 + s * 4)));
    };
    const double guess = -2 * c0 / (c1 + std::sqrt(larger(c1 * c1 - 4 * c0 * c2, 0.0)));
    const Search found = newton(step, -half, 0.0, guess);
    block.slow[i] = found.root;
    block.doubtful[i] = found.unsettled;
  }
}

/// As coherence_root in roots.cpp: a distance y from s = -g, or from s = -k where the root lies nearer to it.
HALFTURN_CLONES void second_roots(const Problem& problem, DetuningBlock& block) {
  const int count = block.count;
  const Problem p = problem;
  const double w2 = p.rabi * p.rabi, g = p.coherence, k = p.leaving, half = 0.5 * p.loss;
  const double end = g - k, middle = 0.5 * end;
  const double middle_ratio = (middle - g) * (middle - end) / (middle - g + half);
  for (int i = 0; i < count; ++i) {
    const double d2 = block.detuning[i] * block.detuning[i];
    const double at_middle = (middle * middle + d2) * middle_ratio + w2 * middle;
    const bool beyond = at_middle * end < 0;
    const double to_x = beyond ? end : 0.0, limit = beyond ? -middle : middle;
    const auto step = [=](double y) HALFTURN_INLINE_LAMBDA {
      const double x = y + to_x, s = y - (beyond ? k : g), s_plus_k = y + (beyond ? 0.0 : -end);
      const double pole = 1 / (s + half), ratio = s * s_plus_k * pole, ratio_s = (s + s_plus_k - ratio) * pole;
      const double h = x * x + d2;
      return (h * ratio + w2 * x) / (2 * x * ratio + h * ratio_s + w2);
    };
    const double guess = coherence_guess(w2, d2, p.loss, g, k) - to_x;
    const Search found = newton(step, smaller(limit, 0.0), larger(limit, 0.0), guess);
    block.second[i] = found.root - (beyond ? k : g);
    block.second_x[i] = found.root + to_x;
    block.doubtful[i] += found.unsettled;
  }
}

/// `weights` are 1/(the error allowed) of a wanted row, else 0.
HALFTURN_CLONES void sum_modes(const Problem& problem, const double* weights, double t, DetuningBlock& block) {
  const int count = block.count;
  const Problem p = problem;
  double weight[kRowCount];
  for (int row = 0; row < kRowCount; ++row) weight[row] = weights[row];
  const Numerator of = numerator(p);
  const double w2 = p.rabi * p.rabi, g = p.coherence, k = p.leaving, c0 = 0.5 * w2 * g * p.loss;
  const bool lossless = p.loss == 0;
  for (int i = 0; i < count; ++i) {
    const double d = block.detuning[i], r0 = block.slow[i], r1 = block.second[i];
    const double c1 = k * (g * g + d * d) + w2 * g;
    const double product = (lossless ? c1 : c0) / (lossless ? -r1 : r0 * r1);
    const double middle = -0.5 * (2 * g + k + r0 + r1), square = product - middle * middle;
    const double w = std::sqrt(larger(square, 0.0)), gap = r0 - r1, from0 = r0 - middle, from1 = r1 - middle;
    const double far0 = from0 * from0 + square, far1 = from1 * from1 + square;
    Sums sums{};
    add(sums, amplitudes<false>(p, d, of, Pole<double>{r0, r0 + g, 1 / (gap * far0), 2 / gap + 4 * from0 / far0}), r0, t);
    add(sums, amplitudes<false>(p, d, of, Pole<double>{r1, block.second_x[i], -1 / (gap * far1), -2 / gap + 4 * from1 / far1}), r1,
        t);
    // The upper root of the pair: its gaps to the others are 2iw, -from0 + iw and -from1 + iw.
    const Complex slope = Complex(0, 2 * w) * (Complex(-from0, w) * Complex(-from1, w));
    const Complex curvature = Complex(0, -1 / w) + 2.0 * (inverse(Complex(-from0, w)) + inverse(Complex(-from1, w)));
    add(sums, amplitudes<false>(p, d, of, Pole<Complex>{Complex(middle, w), Complex(middle + g, w), inverse(slope), curvature}),
        middle, w, t);
    const double a0 = r0 * r0, a1 = r1 * r1;
    const double of_reals = larger(a0, a1) / (gap * gap), of_pair = product / (4 * square);
    const double crowding = larger(larger(of_reals, of_pair), larger(larger(product, a0) / far0, larger(product, a1) / far1));
    double error = 0;
    for (int row = 0; row < kRowCount; ++row) {
      block.rows[row][i] = sums.value[row] + (row == kValueRow && p.bright ? 1.0 : 0.0);
      error += sums.size[row] * weight[row];
    }
    error *= kAmplification * std::sqrt(larger(crowding, 1.0));
    block.doubtful[i] += error <= 1 && square > 0 ? 0.0 : 1.0;
  }
}

HALFTURN_CLONES void undamped_block(const Problem& problem, double t, DetuningBlock& block) {
  const int count = block.count;
  const Problem p = problem;
  const double tilt = 1 - 2 * p.excited, w2 = p.rabi * p.rabi;
  for (int i = 0; i < count; ++i) {
    const double d = block.detuning[i], f2 = w2 + d * d, f = std::sqrt(f2);
    const SineCosine half = sine_cosine(0.5 * f * t);
    const double swing = half.sine * half.sine, sine = half.sine * half.cosine;  // (1 - cos)/2 and sin/2 of f t
    const double depth = tilt * (w2 / f2), by_f = depth * t * sine / f;
    block.rows[kValueRow][i] = p.excited + depth * swing;
    block.rows[kRateRow + kByRabi][i] = 2 * tilt * p.rabi * (d * d / (f2 * f2)) * swing + by_f * p.rabi;
    block.rows[kRateRow + kByDetuning][i] = -2 * depth * (d / f2) * swing + by_f * d;
    block.rows[kLengthRow][i] = depth * f * sine;
    // Where the phase is slight, terms cancel: the scalar path decides.
    block.doubtful[i] = f * t >= 1e-3 && f2 < 1e300 ? 0.0 : 1.0;
  }
}

/// First order in each damping about the rotation by f t around (rabi, 0, detuning)/f, by variation of constants, written out here.
/// With c = detuning/f and s = rabi/f, the state has turned by theta when a damping takes some of it, and that turns on by
/// f t - theta; the products are integrated over theta.
HALFTURN_CLONES void undamped_by_damping(const Problem& problem, double t, DetuningBlock& block) {
  const int count = block.count;
  const Problem p = problem;
  const double w0 = p.excited - p.ground, w2 = p.rabi * p.rabi, sign = p.bright ? -1.0 : 1.0;
  for (int i = 0; i < count; ++i) {
    const double d = block.detuning[i], f2 = w2 + d * d, f = std::sqrt(f2), phase = f * t;
    const double s2 = w2 / f2, c2 = d * d / f2;
    const SineCosine at = sine_cosine(phase);
    // Integrals of 1 - cos theta, of that by cos(phase - theta), of sin theta by sin(phase - theta), of cos theta by cos(phase - theta).
    const double straight = phase - at.sine, by_cosine = 0.5 * (at.sine - phase * at.cosine), both = 0.5 * (at.sine + phase * at.cosine);
    const double of_coherence = w0 * s2 * (c2 * (by_cosine - straight) + by_cosine);
    // What leaves the excited state: twice its population is even + swing cos theta.
    const double even = 1 + w0 * c2, swing = w0 * s2;
    const double left = even * phase + swing * at.sine;
    const double of_leaving = -(c2 * left + s2 * (even * at.sine + swing * both));
    const double inverse = 0.5 / f;
    block.rows[kRateRow + kByDephasing][i] = inverse * of_coherence;
    block.rows[kRateRow + kByDecay][i] = inverse * (0.5 * of_coherence + of_leaving);
    block.rows[kRateRow + kByLoss][i] = 0.5 * inverse * (of_coherence + of_leaving - sign * left);
  }
}

void damped_block(const Problem& problem, const Wanted& wanted, double t, DetuningBlock& block) {
  const int count = block.count;
  double weight[kRowCount] = {};
  weight[kValueRow] = 1 / kValueError;
  for (int row = kRateRow; row < kLengthRow; ++row)
    if (wanted[row]) weight[row] = 1 / (kRateError * t);
  if (problem.loss == 0) {
    for (int i = 0; i < count; ++i) block.slow[i] = block.doubtful[i] = 0;
  } else {
    slow_roots(problem, block);
  }
  second_roots(problem, block);
  sum_modes(problem, weight, t, block);
}

}  // namespace halfturn::dynamics::detail
