// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "tests/model/dynamics/reference_table.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;

// Source: QuTiP's mesolve with rtol 1e-11 (tests/reference/dynamics_qutip.py), loss through a third level. 1e-8 is left for
// what its integrator gathers over up to 1000 steps.
TEST_CASE("populations agree with QuTiP's master equation") {
  const auto scans = tests::read_table("dynamics_qutip", 1);
  REQUIRE(scans.size() == 60);
  double worst = 0;
  for (const auto& scan : scans) {
    const auto found = tests::evaluate(scan.rates, scan.start, scan.length_s);
    REQUIRE(found.status == dynamics::Status::ok);
    for (std::size_t k = 0; k < scan.length_s.size(); ++k) {
      worst = std::max(worst, std::abs(found.rows[0][k] - scan.rows[0][k]));
      CHECK(found.rows[0][k] == Approx(scan.rows[0][k]).margin(1e-8).epsilon(0));
      CHECK(dynamics::population(scan.rates, scan.start, scan.length_s[k]) == Approx(found.rows[0][k]).margin(1e-12).epsilon(0));
    }
  }
  INFO("largest difference " << worst);
  CHECK(worst > 0);  // a table of another program is never equal to the last bit
}
