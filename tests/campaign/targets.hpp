// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "tests/campaign/report.hpp"

/// What the campaign must show, each band widened to where chance alone would take it once in a million.
namespace halfturn::campaign {

/// Share of a family's healthy scans that is to be used.
inline constexpr double kUsed = 0.98;

/// Bands of the two coverages of all converged scans, by what the family's truth is; all of 0...1 where it is none of the candidates.
struct Bands {
  double low_68, high_68, low_95, high_95;
};
Bands bands(Kind kind);

/// Share of wrong scans that is allowed, and the least coverage of 95 % intervals of used scans that no candidate describes.
inline constexpr double kWrong = 3e-6, kMisfitCoverage = 0.85;

/// Probability of `k` or more successes of `n` at the probability `p`; relative error < 1e-9 for n below a million.
double probability_at_least(std::int64_t k, std::int64_t n, double p);

/// A sentence for every figure outside its band; empty: all is well.
std::vector<std::string> failures(const Result& result);

}  // namespace halfturn::campaign
