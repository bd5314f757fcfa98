// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <istream>
#include <ostream>
#include <stdexcept>
#include <string>
#include <vector>

#include "tests/campaign/run.hpp"

/// The campaign's scans handed to another pipeline, and its answers scored beside the daemon's.
namespace halfturn::campaign {

/// The drawn scans, one JSON object a line: `family`, `seed`, `index`; `duration_s` (flops) or `detuning_hz` and `pulse_s` (lines);
/// `counts`, `shots`; what is known beforehand (`contrast`, `floor`, `dead_time_s`, each [mean, sigma]; `carrier_sigma_hz`;
/// `expect_hz`, [low, high]; `references`: bright and dark counts, each [counts, shots]), where it is; `max_angle_error_rad`,
/// `max_carrier_error` (of the width); and the `truth`, which is for whoever looks, not for the pipeline.
void dump(std::ostream& out, const Order& order, const std::vector<const Family*>& wanted);

/// Another pipeline's answers cannot be scored as they stand; the sentence says which line and why.
struct BadAnswers : std::runtime_error {
  using std::runtime_error::runtime_error;
};

struct Comparison {
  std::vector<Row> ours, theirs;  // by family, in the order of the first answer
};

/// Answers, one JSON object a line: `family`, `seed`, `index`, `used`; where it is used `pi_s` and `pi_sigma_s`, or
/// `offset_hz`. Each scan is drawn again, answered as by the daemon, and both are scored by score.hpp. Throws BadAnswers.
Comparison compare(std::istream& answers, int threads);

/// Side by side, a row a family and one for all.
void print_comparison(std::ostream& out, const Comparison& comparison);

}  // namespace halfturn::campaign
