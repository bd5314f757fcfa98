// SPDX-License-Identifier: Apache-2.0
#include "model/atom/angular.hpp"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <initializer_list>
#include <limits>

namespace halfturn::atom {
namespace {

constexpr int kLargestFactorial = 4 * kLargestTwiceSpin;

/// n! as the nearest long double; n up to kLargestFactorial.
long double factorial(int n) {
  static const auto table = [] {
    std::array<long double, kLargestFactorial + 1> values{};
    values[0] = 1.0L;
    for (std::size_t i = 1; i < values.size(); ++i) values[i] = values[i - 1] * static_cast<long double>(i);
    return values;
  }();
  return table[static_cast<std::size_t>(n)];
}

/// n over k, a whole number; 0 outside 0 <= k <= n. Each step of the product is itself a binomial, so nothing is rounded
/// below 2^64.
long double binomial(int n, int k) {
  if (k < 0 || k > n) return 0.0L;
  long double value = 1.0L;
  for (int i = 1; i <= std::min(k, n - k); ++i)
    value = value * static_cast<long double>(n - i + 1) / static_cast<long double>(i);
  return value;
}

long double sign_of(int exponent) { return exponent % 2 == 0 ? 1.0L : -1.0L; }

/// (a+b-c)! (a-b+c)! (-a+b+c)! / (a+b+c+1)!, doubled arguments.
long double triangle_squared(int a, int b, int c) {
  return factorial((a + b - c) / 2) * factorial((a - b + c) / 2) * factorial((-a + b + c) / 2) /
         factorial((a + b + c) / 2 + 1);
}

bool is_projection(int twice_j, int twice_m) { return std::abs(twice_m) <= twice_j && (twice_j - twice_m) % 2 == 0; }

}  // namespace

bool is_triangle(int a, int b, int c) {
  return a >= 0 && b >= 0 && c >= 0 && (a + b + c) % 2 == 0 && c <= a + b && c >= std::abs(a - b);
}

double wigner_3j(int a, int b, int c, int alpha, int beta, int gamma) {
  if (!is_triangle(a, b, c) || alpha + beta + gamma != 0) return 0.0;
  if (!is_projection(a, alpha) || !is_projection(b, beta) || !is_projection(c, gamma)) return 0.0;
  if (std::max({a, b, c}) > kLargestTwiceSpin) return std::numeric_limits<double>::quiet_NaN();
  const int ab = (a + b - c) / 2, ac = (a - b + c) / 2, bc = (-a + b + c) / 2;
  long double sum = 0.0L;
  for (int t = 0; t <= ab; ++t) {
    sum += sign_of(t) * binomial(ab, t) * binomial(ac, (a - alpha) / 2 - t) * binomial(bc, (b + beta) / 2 - t);
  }
  const long double numerator = binomial(a, ab) * binomial(b, ab);
  const long double denominator = binomial((a + b + c) / 2 + 1, ab) * static_cast<long double>(c + 1) *
                                  binomial(a, (a - alpha) / 2) * binomial(b, (b - beta) / 2) * binomial(c, (c - gamma) / 2);
  return static_cast<double>(sign_of((a - b - gamma) / 2) * std::sqrt(numerator / denominator) * sum);
}

double wigner_6j(int a, int b, int c, int d, int e, int f) {
  if (!is_triangle(a, b, c) || !is_triangle(a, e, f) || !is_triangle(d, b, f) || !is_triangle(d, e, c)) return 0.0;
  if (std::max({a, b, c, d, e, f}) > kLargestTwiceSpin) return std::numeric_limits<double>::quiet_NaN();
  const int abc = (a + b + c) / 2, aef = (a + e + f) / 2, dbf = (d + b + f) / 2, dec = (d + e + c) / 2;
  const int first = std::max({abc, aef, dbf, dec});
  const int last = std::min({(a + b + d + e) / 2, (b + c + e + f) / 2, (c + a + f + d) / 2});
  long double sum = 0.0L;
  for (int t = first; t <= last; ++t) {
    sum += sign_of(t) * binomial(t + 1, t - abc) * binomial((a + b - c) / 2, t - dec) * binomial((b + c - a) / 2, t - aef) *
           binomial((c + a - b) / 2, t - dbf);
  }
  const long double squared =
      triangle_squared(a, e, f) * triangle_squared(d, b, f) * triangle_squared(d, e, c) / triangle_squared(a, b, c);
  return static_cast<double>(std::sqrt(squared) * sum);
}

double hyperfine_factor(int twice_I, int twice_J, int twice_F, int twice_m, int twice_J_upper, int twice_F_upper,
                        int twice_m_upper) {
  const double to_hyperfine = static_cast<double>(sign_of((twice_F_upper + twice_J + 2 + twice_I) / 2)) *
                              std::sqrt((twice_F_upper + 1.0) * (twice_J + 1.0)) *
                              wigner_6j(twice_J, twice_J_upper, 2, twice_F_upper, twice_F, twice_I);
  const double to_zeeman = static_cast<double>(sign_of((twice_F_upper - 2 + twice_m) / 2)) * std::sqrt(twice_F + 1.0) *
                           wigner_3j(twice_F_upper, 2, twice_F, twice_m_upper, twice_m - twice_m_upper, -twice_m);
  return to_hyperfine * to_zeeman;
}

double hyperfine_strength(int twice_I, int twice_J, int twice_F, int twice_J_upper, int twice_F_upper) {
  const double symbol = wigner_6j(twice_J, twice_J_upper, 2, twice_F_upper, twice_F, twice_I);
  return (twice_F_upper + 1.0) * (twice_J + 1.0) * symbol * symbol;
}

std::string half_text(int twice) {
  if (twice % 2 == 0) return std::to_string(twice / 2);
  return std::to_string(twice) + "/2";
}

Result<int> read_half(std::string_view text, const std::string& where) {
  const auto wrong = [&] {
    return fault("bad_value", where,
                 "found '" + std::string(text) + "', expected a spin or projection such as 2, 3/2 or -1/2");
  };
  std::string_view digits = text;
  if (digits.starts_with("+-")) return wrong();
  if (digits.starts_with('+')) digits.remove_prefix(1);
  const bool is_half = digits.ends_with("/2");
  if (is_half) digits.remove_suffix(2);
  int value = 0;
  const auto end = std::from_chars(digits.data(), digits.data() + digits.size(), value);
  if (end.ec != std::errc() || end.ptr != digits.data() + digits.size() || std::abs(value) > 50) return wrong();
  if (is_half && value % 2 == 0) return wrong();
  return is_half ? value : 2 * value;
}

}  // namespace halfturn::atom
