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

struct Worst {
  double value = 0, derivative = 0;
};

/// Takes a scan's rows into account; the first failures are shown.
void compare(const tests::ReferenceScan& scan, const std::vector<double> (&rows)[7], Worst& worst) {
  for (int row = 0; row < 7; ++row) {
    for (std::size_t k = 0; k < scan.length_s.size(); ++k) {
      const double error = std::abs(rows[row][k] - scan.rows[row][k]) / scale(scan, row);
      double& so_far = row == 0 ? worst.value : worst.derivative;
      so_far = std::isnan(error) ? error : std::max(so_far, error);
      if (error < (row == 0 ? 1e-10 : 1e-7)) continue;
      UNSCOPED_INFO(scan.kind << " row " << row << " rabi " << scan.rates.rabi << " detuning " << scan.rates.detuning << " decay "
                              << scan.rates.decay << " loss " << scan.rates.loss << " dephasing " << scan.rates.dephasing
                              << " length " << scan.length_s[k] << ": " << rows[row][k] << " for " << scan.rows[row][k]);
    }
  }
}

/// The scan point by point as detuning scans of one point, on a line that lies at `offset`.
void by_detuning_scans(const tests::ReferenceScan& scan, std::vector<double> (&rows)[7]) {
  const auto all = tests::spans(rows, scan.length_s.size());
  dynamics::Workspace workspace;
  dynamics::Status status{};
  dynamics::Rates rates = scan.rates;
  rates.detuning = 0;
  for (std::size_t k = 0; k < scan.length_s.size(); ++k) {
    dynamics::Derivatives out;
    out.population = all.population.subspan(k, 1);
    for (int i = 0; i < dynamics::kRateCount; ++i) out.by_rate[i] = all.by_rate[i].subspan(k, 1);
    out.by_length = all.by_length.subspan(k, 1);
    dynamics::detuning_scan(std::span(&rates, 1), scan.start, std::span(&scan.rates.detuning, 1), std::span(&scan.length_s[k], 1),
                            out, std::span(&status, 1), workspace);
    out.by_rate[dynamics::kByDetuning][0] *= -1;
  }
}

}  // namespace

// Source: scipy.linalg.expm on 2550 seeded parameter sets (tests/reference/dynamics_expm.py).
TEST_CASE("populations and derivatives agree with the matrix exponential") {
  const auto scans = tests::read_table("dynamics_expm", 7);
  REQUIRE(scans.size() >= 2000);
  std::map<std::string, Worst> duration, detuning;
  for (const auto& scan : scans) {
    const auto found = tests::evaluate(scan.rates, scan.start, scan.length_s);
    REQUIRE(found.status == dynamics::Status::ok);
    compare(scan, found.rows, duration[scan.kind]);
    std::vector<double> rows[7];
    by_detuning_scans(scan, rows);
    compare(scan, rows, detuning[scan.kind]);
  }
  for (const auto* worst : {&duration, &detuning})
    for (const auto& [kind, here] : *worst) {
      INFO((worst == &duration ? "duration scans, " : "detuning scans, ")
           << kind << ": largest error of values " << here.value << ", of derivatives " << here.derivative);
      CHECK(here.value < 1e-10);
      CHECK(here.derivative < 1e-7);
    }
}
