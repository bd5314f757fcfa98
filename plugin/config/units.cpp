// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/units.hpp"

#include <array>
#include <charconv>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

struct Words {
  std::string_view article;  // what it is called
  std::string_view number;   // of the example, where none was found
  std::string_view unit;     // of the example
  std::string_view others;   // likely units beside it
};

constexpr std::array<Words, 10> kWords = {{{"a number", "0.5", "", ""},
                                           {"a fraction", "0.2", "", ""},
                                           {"a time", "4", "us", "ns, ms, s"},
                                           {"a frequency", "12.5", "kHz", "Hz, MHz, GHz"},
                                           {"a length", "45", "um", "nm, mm, m"},
                                           {"an angle", "20", "mrad", "rad, deg, pi/2"},
                                           {"a power", "1", "mW", "uW, W"},
                                           {"an intensity", "1", "mW/cm^2", "W/m^2, W/cm^2"},
                                           {"a dipole moment", "2.5", "e a0", "C m"},
                                           {"a magnetic moment", "0.5", "muB", "J/T"}}};

const Words& words(Dimension dimension) { return kWords[static_cast<std::size_t>(dimension)]; }

bool is_digit(char c) { return c >= '0' && c <= '9'; }

std::string_view trimmed(std::string_view text) {
  while (!text.empty() && (text.front() == ' ' || text.front() == '\t')) text.remove_prefix(1);
  while (!text.empty() && (text.back() == ' ' || text.back() == '\t')) text.remove_suffix(1);
  return text;
}

bool drop(std::string_view& text, std::string_view prefix) {
  if (!text.starts_with(prefix)) return false;
  text.remove_prefix(prefix.size());
  return true;
}

std::size_t digits(std::string_view text, std::size_t at) {
  std::size_t n = 0;
  while (at + n < text.size() && is_digit(text[at + n])) ++n;
  return n;
}

/// Length of the decimal number that `text` begins with; 0 where there is none. An `e` without digits belongs to the unit.
std::size_t number_length(std::string_view text) {
  std::size_t at = !text.empty() && (text[0] == '-' || text[0] == '+') ? 1 : 0;
  const std::size_t whole = digits(text, at);
  if (whole > 1 && text[at] == '0') return 0;  // 0123: octal to some, decimal to others
  at += whole;
  std::size_t decimals = 0;
  if (at < text.size() && text[at] == '.') {
    decimals = digits(text, at + 1);
    at += 1 + decimals;
  }
  if (whole + decimals == 0) return 0;
  if (at < text.size() && (text[at] == 'e' || text[at] == 'E')) {
    const std::size_t sign = at + 1 < text.size() && (text[at + 1] == '-' || text[at + 1] == '+') ? 1 : 0;
    const std::size_t exponent = digits(text, at + 1 + sign);
    if (exponent > 0) at += 1 + sign + exponent;
  }
  return at;
}

/// Takes an SI prefix off `unit` where what is left is `base`; NaN where it does not fit.
double prefixed(std::string_view unit, std::string_view base) {
  struct Prefix {
    std::string_view text;
    double factor;
  };
  static constexpr std::array<Prefix, 12> kPrefixes = {{{"", 1.0},
                                                        {"f", 1e-15},
                                                        {"p", 1e-12},
                                                        {"n", 1e-9},
                                                        {"u", 1e-6},
                                                        {"\u00b5", 1e-6},
                                                        {"\u03bc", 1e-6},
                                                        {"m", 1e-3},
                                                        {"k", 1e3},
                                                        {"M", 1e6},
                                                        {"G", 1e9},
                                                        {"T", 1e12}}};
  if (!unit.ends_with(base)) return std::nan("");
  const std::string_view head = unit.substr(0, unit.size() - base.size());
  for (const Prefix& prefix : kPrefixes)
    if (head == prefix.text) return prefix.factor;
  return std::nan("");
}

double length_unit(std::string_view unit) { return unit == "cm" ? 1e-2 : prefixed(unit, "m"); }

double time_unit(std::string_view unit) {
  if (unit == "min") return 60.0;
  if (unit == "h") return 3600.0;
  return prefixed(unit, "s");
}

double angle_unit(std::string_view unit) {
  if (unit == "deg" || unit == "\u00b0") return constants::kPi / 180.0;
  return prefixed(unit, "rad");
}

double intensity_unit(std::string_view unit) {
  const std::size_t slash = unit.find('/');
  if (slash == std::string_view::npos) return std::nan("");
  const std::string_view power = trimmed(unit.substr(0, slash));
  std::string_view area = trimmed(unit.substr(slash + 1));
  for (const std::string_view square : {"^2", "\u00b2", "2"}) {
    if (!area.ends_with(square)) continue;
    const double side = length_unit(area.substr(0, area.size() - square.size()));
    return prefixed(power, "W") / (side * side);
  }
  return std::nan("");
}

double dipole_unit(std::string_view unit) {
  for (const std::string_view text : {"e a0", "e*a0", "ea0"})
    if (unit == text) return constants::kDipoleAtomicUnit;
  for (const std::string_view text : {"C m", "C*m", "Cm"})
    if (unit == text) return 1.0;
  return std::nan("");
}

double magnetic_unit(std::string_view unit) {
  if (unit == "J/T") return 1.0;
  for (const std::string_view text : {"muB", "uB", "\u00b5B", "\u03bcB"})
    if (unit == text) return constants::kBohrMagneton;
  return std::nan("");
}

/// SI units in one `unit` of the dimension; NaN where it is none of its units.
double unit_factor(std::string_view unit, Dimension dimension) {
  switch (dimension) {
    case Dimension::number: return unit.empty() ? 1.0 : std::nan("");
    case Dimension::fraction: return unit.empty() ? 1.0 : unit == "%" ? 0.01 : std::nan("");
    case Dimension::time: return time_unit(unit);
    case Dimension::frequency: return prefixed(unit, "Hz");
    case Dimension::length: return length_unit(unit);
    case Dimension::angle: return angle_unit(unit);
    case Dimension::power: return prefixed(unit, "W");
    case Dimension::intensity: return intensity_unit(unit);
    case Dimension::dipole: return dipole_unit(unit);
    case Dimension::magnetic: return magnetic_unit(unit);
  }
  return std::nan("");
}

/// Multiples and fractions of pi: `pi`, `-pi`, `3*pi/2`, `0.5 pi`.
std::optional<double> multiple_of_pi(std::string_view text) {
  double value = constants::kPi;
  const std::size_t length = number_length(text);
  if (length > 0) {
    value *= decimal(text.substr(0, length)).value_or(std::nan(""));
    text = trimmed(text.substr(length));
    drop(text, "*");
    text = trimmed(text);
  } else if (drop(text, "-")) {
    value = -value;
  }
  if (!drop(text, "pi") && !drop(text, "\u03c0")) return std::nullopt;
  text = trimmed(text);
  if (drop(text, "/")) {
    const auto divisor = decimal(trimmed(text));
    if (!divisor || *divisor == 0.0) return std::nullopt;
    value /= *divisor;
  } else if (!text.empty()) {
    return std::nullopt;
  }
  return std::isfinite(value) ? std::optional(value) : std::nullopt;
}

/// The dimension that a unit belongs to, in words; empty where it is no known unit.
std::string_view dimension_of(std::string_view unit) {
  if (unit.empty()) return {};
  if (unit == "%") return "a percentage";
  if (unit.ends_with("rad/s")) return "an angular frequency: divide it by 2 pi";
  for (std::size_t i = 2; i < kWords.size(); ++i)
    if (!std::isnan(unit_factor(unit, static_cast<Dimension>(i)))) return kWords[i].article;
  return {};
}

std::string complaint(std::string_view text, std::string_view number, std::string_view unit, Dimension dimension) {
  std::string found = "found " + wire::in_quotes(text);
  const std::string_view other = number.empty() ? std::string_view() : dimension_of(unit);
  if (!other.empty()) found += " (" + std::string(other) + ")";
  const bool meant = unit.empty() || !other.empty();  // the number can be trusted to be one
  return found + ", expected " + expected(dimension, meant ? number : std::string_view());
}

}  // namespace

std::optional<double> decimal(std::string_view text) {
  if (text.empty() || number_length(text) != text.size()) return std::nullopt;
  if (text.front() == '+') text.remove_prefix(1);
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc() || end != text.data() + text.size() || !std::isfinite(value)) return std::nullopt;
  return value;
}

Result<double> quantity(std::string_view text, Dimension dimension) {
  const std::string_view whole = trimmed(text);
  if (dimension == Dimension::angle)
    if (const auto angle = multiple_of_pi(whole)) return *angle;
  const std::size_t length = number_length(whole);
  const std::string_view number = whole.substr(0, length);
  const std::string_view unit = trimmed(whole.substr(length));
  const auto value = decimal(number);
  const double factor = unit_factor(unit, dimension);
  if (!value || std::isnan(factor))
    return fault("bad_value", "", complaint(text, value ? number : std::string_view(), unit, dimension));
  const double scaled = *value * factor;
  if (!std::isfinite(scaled)) return fault("bad_value", "", complaint(text, {}, unit, dimension));
  return scaled;
}

std::string expected(Dimension dimension, std::string_view number) {
  const Words& word = words(dimension);
  const std::string example(number.empty() ? word.number : number);
  if (dimension == Dimension::number) return "a number without a unit, such as " + example;
  if (dimension == Dimension::fraction) return "a fraction without a unit, such as 0.2 or 20 %";
  return std::string(word.article) + " with its unit, such as " + example + " " + std::string(word.unit) + " (or " +
         std::string(word.others) + ")";
}

}  // namespace halfturn::config
