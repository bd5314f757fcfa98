// SPDX-License-Identifier: Apache-2.0
// The short form of an uncertainty: common practice of the trade (JCGM 100:2008, 7.2.2, second form).
#include "model/quantity/format.hpp"

#include <limits>

#include "tests/support/catch.hpp"

using namespace halfturn;

TEST_CASE("a quantity with its uncertainty in the short form") {
  CHECK(with_uncertainty(125340.0, 120.0, "Hz") == "125.34(12) kHz");
  CHECK(with_uncertainty(23.42e6, 0.04e6, "Hz") == "23.42(4) MHz");
  CHECK(with_uncertainty(-1.7e-9, 0.3e-9, "s") == "-1.7(3) ns");
  CHECK(with_uncertainty(4.0e-6, 0.0, "s") == "4.0000 \u00b5s");
  CHECK(with_uncertainty(0.92, 0.015, "") == "0.920(15)");
  CHECK(with_uncertainty(100.021471, 0.000079, "g") == "100.02147(8) g");
  CHECK(with_uncertainty(9.9, 0.96, "V") == "10(1) V");
  CHECK(with_uncertainty(1e3, 2e5, "Hz") == "0(200) kHz");
  CHECK(with_uncertainty(std::numeric_limits<double>::quiet_NaN(), 1.0, "s") == "unknown");
}

TEST_CASE("a plain number and one with a prefix") {
  CHECK(plain(0.314159265, 5) == "0.31416");
  CHECK(plain(2.5e-9, 3) == "2.50e-09");
  CHECK(engineering(0.0, "s") == "0 s");
  CHECK(engineering(1e6, "Hz", 3) == "1.00 MHz");
}
