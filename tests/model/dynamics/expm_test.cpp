// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <map>

#include "tests/model/dynamics/reference_table.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;

namespace {

double largest(const std::vector<double>& values) {
  double result = 0;
  for (double v : values) result = std::max(result, std::abs(v));
  return result;
}

/// The scale of a row's error, as two_level.hpp states it.
double scale(const tests::ReferenceScan& scan, int row) {
  const auto& r = scan.rates;
  if (row == 0) return 1;
  const double rate = std::max({std::abs(r.rabi), std::abs(r.detuning), r.decay, r.loss, r.dephasing});
  // Where all rates are 0, any scale serves: the derivative by length is 0.
  return std::max({largest(scan.rows[row]), 1e-3 * (row < 6 ? largest(scan.length_s) : rate), 1e-300});
}

}  // namespace

// Source: scipy.linalg.expm on 2550 seeded parameter sets (tests/reference/dynamics_expm.py).
TEST_CASE("populations and derivatives agree with the matrix exponential") {
  const auto scans = tests::read_table("dynamics_expm", 7);
  REQUIRE(scans.size() >= 2000);
  struct Worst {
    double value = 0, derivative = 0;
    int failed = 0;
  };
  std::map<std::string, Worst> worst;
  for (const auto& scan : scans) {
    const auto found = tests::evaluate(scan.rates, scan.start, scan.length_s);
    REQUIRE(found.status == dynamics::Status::ok);
    Worst& here = worst[scan.kind];
    for (int row = 0; row < 7; ++row) {
      for (std::size_t k = 0; k < scan.length_s.size(); ++k) {
        const double error = std::abs(found.rows[row][k] - scan.rows[row][k]) / scale(scan, row);
        double& so_far = row == 0 ? here.value : here.derivative;
        so_far = std::max(so_far, error);
        if (error < (row == 0 ? 1e-10 : 1e-7)) continue;
        if (++here.failed > 3) continue;
        UNSCOPED_INFO(scan.kind << " row " << row << " rabi " << scan.rates.rabi << " detuning " << scan.rates.detuning
                                << " decay " << scan.rates.decay << " loss " << scan.rates.loss << " dephasing "
                                << scan.rates.dephasing << " length " << scan.length_s[k] << ": " << found.rows[row][k]
                                << " for " << scan.rows[row][k] << ", scale " << scale(scan, row));
      }
    }
  }
  for (const auto& [kind, here] : worst) {
    INFO(kind << ": largest error of values " << here.value << ", of derivatives " << here.derivative);
    CHECK(here.value < 1e-10);
    CHECK(here.derivative < 1e-7);
  }
}
