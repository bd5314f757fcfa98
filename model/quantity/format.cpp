// SPDX-License-Identifier: Apache-2.0
#include "model/quantity/format.hpp"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>

namespace halfturn {
namespace {

struct Scaled {
  double factor;
  std::string_view prefix;
};

Scaled prefix_for(double magnitude, std::string_view unit) {
  static constexpr std::array<std::string_view, 17> kPrefixes = {"y", "z", "a", "f", "p", "n", "\u00b5", "m", "",
                                                                  "k", "M", "G", "T", "P", "E", "Z", "Y"};
  if (unit.empty() || !(magnitude > 0.0) || !std::isfinite(magnitude)) return {1.0, ""};
  const int step = std::clamp(static_cast<int>(std::floor(std::log10(magnitude) / 3.0 + 1e-12)), -8, 8);
  return {std::pow(10.0, 3 * step), kPrefixes[static_cast<std::size_t>(step + 8)]};
}

std::string fixed(double value, int decimals) {
  std::array<char, 400> buffer{};
  const auto end = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::fixed, std::max(decimals, 0));
  return std::string(buffer.data(), end.ptr);
}

int decimals_for(double magnitude, int digits) {
  if (!(magnitude > 0.0)) return 0;
  return std::clamp(digits - 1 - static_cast<int>(std::floor(std::log10(magnitude) + 1e-12)), 0, 300);
}

std::string unit_tail(std::string_view prefix, std::string_view unit) {
  if (prefix.empty() && unit.empty()) return {};
  return " " + std::string(prefix) + std::string(unit);
}

}  // namespace

std::string plain(double value, int digits) {
  if (!std::isfinite(value)) return "unknown";
  const double magnitude = std::abs(value);
  if (value == 0.0 || (magnitude >= 1e-3 && magnitude < 1e6)) return fixed(value, decimals_for(magnitude, digits));
  std::array<char, 64> buffer{};
  const auto end = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::scientific, digits - 1);
  return std::string(buffer.data(), end.ptr);
}

std::string engineering(double value, std::string_view unit, int digits) {
  if (!std::isfinite(value)) return "unknown";
  const auto scale = prefix_for(std::abs(value), unit);
  const double scaled = value / scale.factor;
  return fixed(scaled, decimals_for(std::abs(scaled), digits)) + unit_tail(scale.prefix, unit);
}

std::string with_uncertainty(double value, double sigma, std::string_view unit) {
  if (!std::isfinite(value)) return "unknown";
  if (!std::isfinite(sigma) || !(sigma > 0.0)) return engineering(value, unit);
  const auto scale = prefix_for(std::max(std::abs(value), sigma), unit);
  const double scaled_value = value / scale.factor;
  const double scaled_sigma = sigma / scale.factor;
  int exponent = static_cast<int>(std::floor(std::log10(scaled_sigma) + 1e-12));
  const double leading = scaled_sigma / std::pow(10.0, exponent);
  const int digits = leading < 2.95 ? 2 : 1;
  if (digits == 1 && leading >= 9.5) ++exponent;
  const int decimals = digits - 1 - exponent;
  if (decimals <= 0) {
    const double step = std::pow(10.0, -decimals);
    return fixed(std::round(scaled_value / step) * step, 0) + "(" + fixed(std::round(scaled_sigma / step) * step, 0) + ")" +
           unit_tail(scale.prefix, unit);
  }
  return fixed(scaled_value, decimals) + "(" + fixed(std::round(scaled_sigma * std::pow(10.0, decimals)), 0) + ")" +
         unit_tail(scale.prefix, unit);
}

}  // namespace halfturn
