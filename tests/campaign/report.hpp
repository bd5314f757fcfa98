// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <ostream>
#include <span>
#include <string>
#include <vector>

#include "tests/campaign/score.hpp"

/// The campaign's result as a table and as JSON.
namespace halfturn::campaign {

struct WrongScan {
  std::string family;
  std::uint64_t seed = 0, index = 0;
  double held_against = 0;
};

struct Result {
  std::vector<std::uint64_t> seeds;
  std::int64_t scans = 0, wrong = 0;
  double seconds = 0;
  int threads = 1;
  std::vector<Row> rows;
  std::vector<WrongScan> wrong_scans;
};

void print_table(std::ostream& out, const Result& result);
void print_json(std::ostream& out, const Result& result);

/// One case with its truth, bounds, reply and score: what is looked at where a scan was wrong.
void print_case(std::ostream& out, const Case& of, const Family& family);

}  // namespace halfturn::campaign
