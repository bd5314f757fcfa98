// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/basis.hpp"

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstdint>
#include <limits>

#include "model/quantity/clones.hpp"
#include "model/quantity/elementary.hpp"

namespace halfturn::dynamics::detail {

using namespace elementary;

namespace {

constexpr std::size_t kWidth = 8;      // lanes of the recurrence: two AVX2 registers a mode
constexpr std::size_t kRestart = 512;  // points; 64 products of relative error 2e-16 stay below 2e-14

/// values[j] = start * factor^j for j < 8; returns factor^8.
double powers(double start, double factor, double* values) {
  const double f2 = factor * factor, f4 = f2 * f2;
  values[0] = start;
  values[1] = start * factor;
  for (int j = 0; j < 2; ++j) values[j + 2] = values[j] * f2;
  for (int j = 0; j < 4; ++j) values[j + 4] = values[j] * f4;
  return f4 * f4;
}

struct Turn {
  double cosine, sine;
};

Turn operator*(Turn a, Turn b) { return {a.cosine * b.cosine - a.sine * b.sine, a.cosine * b.sine + a.sine * b.cosine}; }

Turn turn(double size, double phase) { return {size * std::cos(phase), size * std::sin(phase)}; }

Turn powers(Turn start, Turn factor, double* cosines, double* sines) {
  const Turn f2 = factor * factor, f4 = f2 * f2;
  Turn at[kWidth] = {start, start * factor};
  for (int j = 0; j < 2; ++j) at[j + 2] = at[j] * f2;
  for (int j = 0; j < 4; ++j) at[j + 4] = at[j] * f4;
  for (std::size_t j = 0; j < kWidth; ++j) {
    cosines[j] = at[j].cosine;
    sines[j] = at[j].sine;
  }
  return f4 * f4;
}

}  // namespace

/// out[k] = values[k mod 8] * factor^(k div 8)
HALFTURN_CLONES void repeat_product(double* values, double factor, std::size_t points, double* out) {
  std::size_t k = 0;
  for (; k + kWidth <= points; k += kWidth)
    for (std::size_t j = 0; j < kWidth; ++j) {
      out[k + j] = values[j];
      values[j] *= factor;
    }
  for (std::size_t j = 0; k + j < points; ++j) out[k + j] = values[j];
}

HALFTURN_CLONES void repeat_turn(double* cosines, double* sines, double cosine, double sine, std::size_t points, double* c,
                                 double* s) {
  std::size_t k = 0;
  for (; k + kWidth <= points; k += kWidth)
    for (std::size_t j = 0; j < kWidth; ++j) {
      const double x = cosines[j], y = sines[j];
      c[k + j] = x;
      s[k + j] = y;
      cosines[j] = x * cosine - y * sine;
      sines[j] = x * sine + y * cosine;
    }
  for (std::size_t j = 0; k + j < points; ++j) {
    c[k + j] = cosines[j];
    s[k + j] = sines[j];
  }
}

HALFTURN_CLONES void exponentials(double rate, const double* t, std::size_t points, double* out) {
  for (std::size_t k = 0; k < points; ++k) out[k] = decaying_exponential(rate * t[k]);
}

HALFTURN_CLONES void turns(double rate, double frequency, const double* t, std::size_t points, double* c, double* s) {
  for (std::size_t k = 0; k < points; ++k) {
    const double size = decaying_exponential(rate * t[k]);
    const SineCosine at = sine_cosine(frequency * t[k]);
    c[k] = size * at.cosine;
    s[k] = size * at.sine;
  }
}

HALFTURN_CLONES void weighted_sum(const double* constant, const double* linear, double offset, const double* t,
                                  const double* b0, const double* b1, const double* b2, const double* b3,
                                  std::size_t points, double* out) {
  const double c0 = constant[0], c1 = constant[1], c2 = constant[2], c3 = constant[3];
  const double l0 = linear[0], l1 = linear[1], l2 = linear[2], l3 = linear[3];
  for (std::size_t k = 0; k < points; ++k) {
    const double x = t[k];
    out[k] = offset + (((c0 + l0 * x) * b0[k] + (c1 + l1 * x) * b1[k]) + ((c2 + l2 * x) * b2[k] + (c3 + l3 * x) * b3[k]));
  }
}

HALFTURN_CLONES bool all_finite(const double* values, std::size_t count) {
  std::uint64_t bad = 0;
  for (std::size_t k = 0; k < count; ++k) {
    const std::uint64_t exponent = std::bit_cast<std::uint64_t>(values[k]) & 0x7ff0000000000000u;
    bad |= (exponent + 0x0010000000000000u) & 0x8000000000000000u;  // carries into the sign bit for an exponent of all ones
  }
  return bad == 0;
}

Grid find_grid(std::span<const double> length_s) {
  const std::size_t points = length_s.size();
  if (points < 2) return {};
  const double first = length_s.front(), step = (length_s.back() - first) / static_cast<double>(points - 1);
  const double slack = 2 * std::numeric_limits<double>::epsilon() * std::max(std::abs(first), std::abs(length_s.back()));
  bool even = step > 0;
  for (std::size_t k = 0; k < points; ++k)
    even &= std::abs(length_s[k] - (first + static_cast<double>(k) * step)) <= slack;
  return {even, step};
}

void basis_even(const Modes& modes, double first, double step, std::size_t points, const Basis& basis) {
  double values[kWidth], sines[kWidth];
  for (std::size_t begin = 0; begin < points; begin += kRestart) {
    const std::size_t count = std::min(kRestart, points - begin);
    const double t = first + static_cast<double>(begin) * step;
    for (int i = 0; i < (modes.oscillates ? 2 : 4); ++i) {
      const double rate = modes.rate[i];
      if (rate == 0) {
        std::fill_n(basis.b[i] + begin, count, 1.0);
        continue;
      }
      const double factor = powers(std::exp(rate * t), std::exp(rate * step), values);
      repeat_product(values, factor, count, basis.b[i] + begin);
    }
    if (!modes.oscillates) continue;
    const double rate = modes.rate[2];
    const Turn factor = powers(turn(std::exp(rate * t), modes.frequency * t),
                               turn(std::exp(rate * step), modes.frequency * step), values, sines);
    repeat_turn(values, sines, factor.cosine, factor.sine, count, basis.b[2] + begin, basis.b[3] + begin);
  }
}

void basis_any(const Modes& modes, const double* t, std::size_t points, const Basis& basis) {
  for (int i = 0; i < (modes.oscillates ? 2 : 4); ++i) {
    if (modes.rate[i] == 0) {
      std::fill_n(basis.b[i], points, 1.0);
    } else {
      exponentials(modes.rate[i], t, points, basis.b[i]);
    }
  }
  if (!modes.oscillates) return;
  double longest = 0;
  for (std::size_t k = 0; k < points; ++k) longest = std::max(longest, t[k]);
  if (modes.frequency * longest <= kLargestPhase) {
    turns(modes.rate[2], modes.frequency, t, points, basis.b[2], basis.b[3]);
    return;
  }
  for (std::size_t k = 0; k < points; ++k) {
    const Turn at = turn(std::exp(modes.rate[2] * t[k]), modes.frequency * t[k]);
    basis.b[2][k] = at.cosine;
    basis.b[3][k] = at.sine;
  }
}

void combine(const Modes& modes, int row, const double* t, const Basis& basis, std::size_t points, double* out) {
  weighted_sum(modes.constant[row], modes.linear[row], modes.offset[row], t, basis.b[0], basis.b[1], basis.b[2], basis.b[3],
               points, out);
}

}  // namespace halfturn::dynamics::detail
