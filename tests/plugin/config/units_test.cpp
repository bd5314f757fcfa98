// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/units.hpp"

#include "tests/support/catch.hpp"

using halfturn::config::decimal;
using halfturn::config::Dimension;
using halfturn::config::quantity;

namespace {

struct Case {
  const char* text;
  Dimension dimension;
  double value;
};

std::string message(const char* text, Dimension dimension) {
  const auto value = quantity(text, dimension);
  return value ? "read as " + std::to_string(*value) : value.error().message;
}

}  // namespace

// Values by hand: SI prefixes (BIPM, SI Brochure, 9th edition, table 7), minute, hour and degree (table 8).
TEST_CASE("Quantities read as SI values") {
  const Case cases[] = {{"45 um", Dimension::length, 45e-6},
                        {"45um", Dimension::length, 45e-6},
                        {"45 \u00b5m", Dimension::length, 45e-6},
                        {"45 \u03bcm", Dimension::length, 45e-6},
                        {"780.241 nm", Dimension::length, 780.241e-9},
                        {"2 m", Dimension::length, 2.0},
                        {"3 mm", Dimension::length, 3e-3},
                        {"1.5 cm", Dimension::length, 0.015},
                        {"8 ns", Dimension::time, 8e-9},
                        {"-12 ns", Dimension::time, -12e-9},
                        {"4.00 us", Dimension::time, 4e-6},
                        {"4.00 \u03bcs", Dimension::time, 4e-6},
                        {"2 min", Dimension::time, 120.0},
                        {"1 h", Dimension::time, 3600.0},
                        {"1 ms", Dimension::time, 1e-3},
                        {"12.5 kHz", Dimension::frequency, 12500.0},
                        {"6 mHz", Dimension::frequency, 6e-3},
                        {"6 MHz", Dimension::frequency, 6e6},
                        {"1e-3 GHz", Dimension::frequency, 1e6},
                        {"429.228 THz", Dimension::frequency, 429.228e12},
                        {"20 mrad", Dimension::angle, 0.020},
                        {"1.2 rad", Dimension::angle, 1.2},
                        {"90 deg", Dimension::angle, 1.5707963267948966},
                        {"90\u00b0", Dimension::angle, 1.5707963267948966},
                        {"pi", Dimension::angle, 3.141592653589793},
                        {"pi/2", Dimension::angle, 1.5707963267948966},
                        {"3*pi/2", Dimension::angle, 4.71238898038469},
                        {"3 pi / 4", Dimension::angle, 2.356194490192345},
                        {"0.5pi", Dimension::angle, 1.5707963267948966},
                        {"\u03c0/2", Dimension::angle, 1.5707963267948966},
                        {"-pi", Dimension::angle, -3.141592653589793},
                        {"250 uW", Dimension::power, 250e-6},
                        {"1 mW/cm^2", Dimension::intensity, 10.0},
                        {"1 mW/cm2", Dimension::intensity, 10.0},
                        {"3 W/m^2", Dimension::intensity, 3.0},
                        {"2 uW/mm\u00b2", Dimension::intensity, 2.0},
                        {"20 %", Dimension::fraction, 0.2},
                        {"20%", Dimension::fraction, 0.2},
                        {"0.2", Dimension::fraction, 0.2},
                        {"0.75", Dimension::number, 0.75},
                        {".5", Dimension::number, 0.5},
                        {"1e-4", Dimension::number, 1e-4},
                        {"+3", Dimension::number, 3.0},
                        // CODATA 2022: e a0 = 8.478 353 6198(13)e-30 C m, muB = 9.274 010 0657(29)e-24 J/T.
                        {"2 e a0", Dimension::dipole, 2.0 * 8.4783536198e-30},
                        {"1e-29 C m", Dimension::dipole, 1e-29},
                        {"0.5 muB", Dimension::magnetic, 0.5 * 9.2740100657e-24}};
  for (const Case& one : cases) {
    CAPTURE(one.text);
    const auto value = quantity(one.text, one.dimension);
    REQUIRE(value.has_value());
    CHECK(*value == Approx(one.value).epsilon(1e-10).margin(0));
  }
}

TEST_CASE("A quantity without its unit names the likely ones") {
  CHECK(message("45", Dimension::length) == "found \"45\", expected a length with its unit, such as 45 um (or nm, mm, m)");
  CHECK(message("8", Dimension::time) == "found \"8\", expected a time with its unit, such as 8 us (or ns, ms, s)");
  CHECK(message("2000", Dimension::frequency) ==
        "found \"2000\", expected a frequency with its unit, such as 2000 kHz (or Hz, MHz, GHz)");
  CHECK(message("1.5", Dimension::angle) ==
        "found \"1.5\", expected an angle with its unit, such as 1.5 mrad (or rad, deg, pi/2)");
  CHECK(message("0", Dimension::time) == "found \"0\", expected a time with its unit, such as 0 us (or ns, ms, s)");
}

TEST_CASE("A quantity of another kind is named") {
  CHECK(message("2 um", Dimension::time) ==
        "found \"2 um\" (a length), expected a time with its unit, such as 2 us (or ns, ms, s)");
  CHECK(message("1e6 rad/s", Dimension::frequency) ==
        "found \"1e6 rad/s\" (an angular frequency: divide it by 2 pi), expected a frequency with its unit, such as 1e6 kHz "
        "(or Hz, MHz, GHz)");
  CHECK(message("3 us", Dimension::number) == "found \"3 us\" (a time), expected a number without a unit, such as 3");
  CHECK(message("3 us", Dimension::fraction) ==
        "found \"3 us\" (a time), expected a fraction without a unit, such as 0.2 or 20 %");
}

TEST_CASE("What is not a decimal number with a known unit is refused") {
  for (const char* text :
       {"",        " ",       "um",      "4 khz",     "4 KHz",  "4 HZ",      "4 mhz",  "0x10 kHz", "010 kHz", "1_000 kHz",
        "1,5 kHz", "inf kHz", "nan kHz", "1e999 kHz", "1e kHz", "4 kHz kHz", "4 k Hz", "--4 kHz",  "4 xHz",   "4 pi Hz"}) {
    CAPTURE(text);
    CHECK_FALSE(quantity(text, Dimension::frequency).has_value());
  }
  for (const char* text : {"pi/0", "pi/x", "pi pi", "2**pi", "pie", "pi*2/", "/2"}) {
    CAPTURE(text);
    CHECK_FALSE(quantity(text, Dimension::angle).has_value());
  }
  for (const char* text : {"0123", ".", "-", "e5", "1e", "1e+", "y", "true", "0b1", "1.2.3"}) {
    CAPTURE(text);
    CHECK_FALSE(decimal(text).has_value());
  }
}
