// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <fstream>
#include <string>
#include <vector>

#include "model/dynamics/two_level.hpp"

namespace halfturn::tests {

/// One block of the tables that tests/reference/dynamics_*.py write.
struct ReferenceScan {
  std::string kind;
  dynamics::Rates rates;
  dynamics::Start start;
  std::vector<double> length_s;
  std::vector<double> rows[7];  // population, by rabi, detuning, decay, loss, dephasing, by length
};

/// Reads a table; empty where the file is not there. `columns` is 7, or 1 for populations alone.
inline std::vector<ReferenceScan> read_table(const std::string& name, int columns) {
  std::ifstream file(std::string(HALFTURN_BINARY_DIR) + "/reference/" + name + ".txt");
  std::vector<ReferenceScan> scans;
  ReferenceScan scan;
  int excited = 0, bright = 0, points = 0;
  while (file >> scan.kind >> scan.rates.rabi >> scan.rates.detuning >> scan.rates.decay >> scan.rates.loss >>
         scan.rates.dephasing >> excited >> scan.start.impurity >> bright >> points) {
    scan.start.prepared = excited != 0 ? dynamics::Prepared::excited : dynamics::Prepared::ground;
    scan.start.lost_reads = bright != 0 ? dynamics::LostReads::bright : dynamics::LostReads::dark;
    scan.length_s.assign(points, 0.0);
    for (auto& row : scan.rows) row.assign(points, 0.0);
    for (int k = 0; k < points; ++k) {
      file >> scan.length_s[k];
      for (int i = 0; i < columns; ++i) file >> scan.rows[i][k];
    }
    scans.push_back(scan);
  }
  return scans;
}

/// The scan as the model computes it, all rows.
struct Evaluated {
  std::vector<double> rows[7];
  dynamics::Status status;
};

inline dynamics::Derivatives spans(std::vector<double> (&rows)[7], std::size_t count) {
  for (auto& row : rows) row.assign(count, 0.0);
  dynamics::Derivatives out;
  out.population = rows[0];
  for (int i = 0; i < dynamics::kRateCount; ++i) out.by_rate[i] = rows[1 + i];
  out.by_length = rows[6];
  return out;
}

inline Evaluated evaluate(const dynamics::Rates& rates, const dynamics::Start& start, const std::vector<double>& length_s) {
  Evaluated result;
  dynamics::Workspace workspace;
  const auto out = spans(result.rows, length_s.size());
  dynamics::duration_scan(std::span(&rates, 1), start, length_s, {}, out, std::span(&result.status, 1), workspace);
  return result;
}

}  // namespace halfturn::tests
