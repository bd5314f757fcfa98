// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <string_view>

/// Numbers as people read them.
namespace halfturn {

/// A number with `digits` significant digits, no exponent between 1e-3 and 1e6: `0.31416`, `125.34`. NaN reads `unknown`.
std::string plain(double value, int digits = 5);

/// A quantity with an SI prefix that puts it between 1 and 1000, and its unit: `engineering(1.2534e5, "Hz")` is
/// `125.34 kHz`. Zero has no prefix. Micro is written with U+00B5.
std::string engineering(double value, std::string_view unit, int digits = 5);

/// A quantity with its standard uncertainty in the trade's short form, two digits of uncertainty where it begins with 1 or
/// 2 and one otherwise: `with_uncertainty(125340.0, 120.0, "Hz")` is `125.34(12) kHz`. An uncertainty that is not finite or
/// not positive is left out.
std::string with_uncertainty(double value, double sigma, std::string_view unit);

}  // namespace halfturn
