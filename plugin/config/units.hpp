// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <string>
#include <string_view>

#include "model/quantity/result.hpp"

/// Quantities as people write them: `45 um`, `12.5 kHz`, `3*pi/2`, `20 %`.
namespace halfturn::config {

enum class Dimension { number, fraction, time, frequency, length, angle, power, intensity, dipole, magnetic };

/// A quantity in SI units: s, Hz (cyclic), m, rad, W, W/m^2, C m, J/T; `fraction` reads `20 %` and `0.2` alike, `number`
/// takes no unit. Micro is `u`, U+00B5 or U+03BC; the space before the unit may be left out. Angles are also `pi`, `pi/2`,
/// `3*pi/2`, `0.5 pi`. Numbers are decimal, with an exponent if wanted; leading zeros, hexadecimal, infinities and NaN are
/// none. Fault `bad_value`, its place empty: `found "45", expected a length with its unit, such as 45 um (or nm, mm, m)`.
Result<double> quantity(std::string_view text, Dimension dimension);

/// A decimal number that is the whole of `text`; none where it is not one, or not finite.
std::optional<double> decimal(std::string_view text);

/// The words for a quantity, with an example that uses `number`: `a length with its unit, such as 45 um (or nm, mm, m)`.
std::string expected(Dimension dimension, std::string_view number = {});

}  // namespace halfturn::config
