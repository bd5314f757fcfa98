// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "tests/campaign/report.hpp"

/// What the campaign must show, each band widened to where chance alone would take it once in a million.
namespace halfturn::campaign {

/// Share of a family's healthy scans that is to be used.
inline constexpr double kUsed = 0.98;

/// Probability of `k` or more successes of `n` at the probability `p`; relative error < 1e-9 for n below a million.
double probability_at_least(std::int64_t k, std::int64_t n, double p);

/// A sentence for every figure outside its band; empty: all is well.
std::vector<std::string> failures(const Result& result);

}  // namespace halfturn::campaign
