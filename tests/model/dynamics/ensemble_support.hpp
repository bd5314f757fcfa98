// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "model/dynamics/ensemble.hpp"

namespace halfturn::tests {

/// The mean scan as the model computes it, all rows: population, by the five rates, by length, by the parameter.
struct MeanScan {
  std::vector<double> rows[8];
  dynamics::Status status = dynamics::Status::ok;
};

/// Of a duration scan with dead time `other`, or where `line` a detuning scan with pulse length `other`. Derivatives by a
/// damping are left out where `damping` is false.
inline MeanScan mean_scan(const dynamics::Rates& rates, const dynamics::Ensemble& ensemble, const dynamics::Start& start,
                          const std::vector<double>& axis, double other, bool line, bool damping,
                          dynamics::EnsembleWorkspace& workspace) {
  MeanScan found;
  for (auto& row : found.rows) row.assign(axis.size(), 0.0);
  dynamics::Derivatives out;
  out.population = found.rows[0];
  for (int i = 0; i < (damping ? dynamics::kRateCount : 2); ++i) out.by_rate[i] = found.rows[1 + i];
  out.by_length = found.rows[6];
  const auto scan = line ? dynamics::ensemble_detuning_scan : dynamics::ensemble_duration_scan;
  scan(rates, ensemble, start, axis, other, out, found.rows[7], found.status, workspace);
  return found;
}

inline dynamics::Ensemble::Kind kind_named(const std::string& name) {
  using Kind = dynamics::Ensemble::Kind;
  return name == "spread" ? Kind::spread : name == "doppler" ? Kind::doppler : name == "cloud" ? Kind::cloud : Kind::thermal;
}

}  // namespace halfturn::tests
