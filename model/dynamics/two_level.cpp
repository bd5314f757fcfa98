// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/two_level.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

#include "model/dynamics/basis.hpp"
#include "model/dynamics/detuning_block.hpp"
#include "model/quantity/elementary.hpp"
#include "model/dynamics/flow.hpp"
#include "model/dynamics/modes.hpp"

namespace halfturn::dynamics {
namespace {

using namespace detail;

constexpr double kNaN = std::numeric_limits<double>::quiet_NaN();
constexpr std::size_t kLanes = 8;  // detunings are computed in multiples of so many, whole vectors

/// The rows of one parameter set, null where not wanted.
using Rows = std::array<double*, kRowCount>;

Rows rows_of(const Derivatives& out, std::size_t begin) {
  const auto at = [begin](std::span<double> span) { return span.empty() ? nullptr : span.data() + begin; };
  Rows rows{};
  rows[kValueRow] = at(out.population);
  for (int rate = 0; rate < kRateCount; ++rate) rows[kRateRow + rate] = at(out.by_rate[rate]);
  rows[kLengthRow] = at(out.by_length);
  return rows;
}

Wanted wanted_of(const Rows& rows) {
  Wanted wanted{};
  for (int row = 0; row < kRowCount; ++row) wanted[row] = rows[row] != nullptr;
  return wanted;
}

void fill(const Rows& rows, std::size_t points, double value) {
  for (double* row : rows)
    if (row != nullptr) std::fill_n(row, points, value);
}

Status finite(const Rows& rows, std::size_t points) {
  for (const double* row : rows)
    if (row != nullptr && !all_finite(row, points)) return Status::not_finite;
  return Status::ok;
}

void put(const Problem& problem, const FlowState& state, const Rows& rows, std::size_t point) {
  for (int row = 0; row < kRowCount; ++row)
    if (rows[row] != nullptr) rows[row][point] = seen(problem, state, row);
}

/// Lengths at which to evaluate, from `first` on, all positive or zero.
struct Lengths {
  const double* t;
  std::size_t points;
  Grid grid;
};

void flow_over(const Problem& problem, const Wanted& wanted, const Lengths& lengths, const Rows& rows, std::size_t begin) {
  Propagator propagator;
  FlowState state = initial_state(problem);
  for (std::size_t k = 0; k < lengths.points; ++k) {
    const bool first = k == 0;
    if (first || !lengths.grid.even) {
      state = initial_state(problem);
      propagate(problem, wanted, lengths.t[k], propagator);
    } else if (k == 1) {
      propagate(problem, wanted, lengths.grid.step, propagator);
    }
    apply(propagator, wanted, state);
    put(problem, state, rows, begin + k);
  }
}

void modes_over(const Modes& modes, const Lengths& lengths, const Rows& rows, std::size_t begin, Workspace& workspace) {
  const Basis basis{{workspace.row(1), workspace.row(2), workspace.row(3), workspace.row(4)}};
  if (lengths.grid.even) {
    basis_even(modes, lengths.t[0], lengths.grid.step, lengths.points, basis);
  } else {
    basis_any(modes, lengths.t, lengths.points, basis);
  }
  for (int row = 0; row < kRowCount; ++row)
    if (rows[row] != nullptr) combine(modes, row, lengths.t, basis, lengths.points, rows[row] + begin);
}

/// Puts effective lengths into the workspace and, on an even grid, the clipped points' outputs into the rows; returns how
/// many leading points are done.
std::size_t clip(const Problem& problem, std::span<const double> length_s, double dead_time, const Grid& grid, double* t,
                 const Rows& rows) {
  std::size_t done = 0;
  for (std::size_t k = 0; k < length_s.size(); ++k) {
    const double effective = length_s[k] - dead_time;
    t[k] = effective < 0 ? 0.0 : effective;  // a NaN stays
    if (grid.even && effective < 0) {
      put(problem, initial_state(problem), rows, k);
      ++done;
    }
  }
  return done;
}

void scan_one(const Problem& problem, std::span<const double> length_s, double dead_time, const Grid& grid, const Rows& rows,
              Workspace& workspace) {
  const Wanted wanted = wanted_of(rows);
  double* t = workspace.row(0);
  const std::size_t points = length_s.size();
  const std::size_t done = clip(problem, length_s, dead_time, grid, t, rows);
  if (done < points) {
    const Lengths lengths{t + done, points - done, grid};
    Modes modes;
    if (decompose(problem, wanted, *std::max_element(t, t + points), modes)) {
      modes_over(modes, lengths, rows, done, workspace);
    } else {
      flow_over(problem, wanted, lengths, rows, done);
    }
  }
  if (double* by_length = rows[kLengthRow])
    for (std::size_t k = 0; k < points; ++k)
      if (length_s[k] - dead_time < 0) by_length[k] = 0;
}

/// All rows at one length; those not wanted are left.
void at_one(const Problem& problem, const Wanted& wanted, double t, double* values) {
  Modes modes;
  if (!decompose(problem, wanted, t, modes)) {
    Propagator propagator;
    FlowState state = initial_state(problem);
    propagate(problem, wanted, t, propagator);
    apply(propagator, wanted, state);
    for (int row = 0; row < kRowCount; ++row)
      if (wanted[row]) values[row] = seen(problem, state, row);
    return;
  }
  double b[4];
  for (int i = 0; i < 4; ++i) b[i] = std::exp(modes.rate[i == 3 && modes.oscillates ? 2 : i] * t);
  if (modes.oscillates) {
    b[2] *= std::cos(modes.frequency * t);
    b[3] *= std::sin(modes.frequency * t);
  }
  for (int row = 0; row < kRowCount; ++row) {
    if (!wanted[row]) continue;
    double sum = modes.offset[row];
    for (int i = 0; i < 4; ++i) sum += (modes.constant[row][i] + modes.linear[row][i] * t) * b[i];
    values[row] = sum;
  }
}

/// Whether vector code serves: not for phases beyond its sine.
bool block_serves(const Problem& problem, const DetuningBlock& block, double t) {
  double largest = 0;
  for (int i = 0; i < block.count; ++i) largest = std::max(largest, std::abs(block.detuning[i]));
  return t > 0 && (largest + std::abs(problem.rabi)) * t <= elementary::kLargestPhase;  // false for NaN
}

void line_one(Problem problem, std::span<const double> axis, double length_s, const Rows& rows) {
  const Wanted wanted = wanted_of(rows);
  const bool by_damping = wanted[kRateRow + kByDecay] || wanted[kRateRow + kByLoss] || wanted[kRateRow + kByDephasing];
  const double t = length_s < 0 ? 0.0 : length_s, offset = problem.detuning;  // a NaN stays
  DetuningBlock block;
  for (std::size_t begin = 0; begin < axis.size(); begin += kBlock) {
    const std::size_t count = std::min<std::size_t>(kBlock, axis.size() - begin);
    const std::size_t whole = (count + kLanes - 1) / kLanes * kLanes;
    block.count = static_cast<int>(whole);
    for (std::size_t i = 0; i < whole; ++i) block.detuning[i] = axis[begin + std::min(i, count - 1)] - offset;
    const bool vector = block_serves(problem, block, t);
    if (vector && problem.undamped) undamped_block(problem, t, block);
    if (vector && problem.undamped && by_damping) undamped_by_damping(problem, t, block);
    if (vector && !problem.undamped) damped_block(problem, wanted, t, block);
    for (std::size_t i = 0; i < count; ++i) {
      if (vector && block.doubtful[i] == 0) continue;
      problem.detuning = block.detuning[i];
      double values[kRowCount] = {};
      at_one(problem, wanted, t, values);
      for (int row = 0; row < kRowCount; ++row) block.rows[row][i] = values[row];
    }
    for (int row = 0; row < kRowCount; ++row)
      if (rows[row] != nullptr) std::copy_n(block.rows[row], count, rows[row] + begin);
  }
  if (double* by_offset = rows[kRateRow + kByDetuning])
    for (std::size_t k = 0; k < axis.size(); ++k) by_offset[k] = -by_offset[k];
  if (length_s < 0 && rows[kLengthRow] != nullptr) std::fill_n(rows[kLengthRow], axis.size(), 0.0);
}

}  // namespace

void Workspace::reserve(std::size_t points) {
  if (points <= stride_) return;
  stride_ = (points + 7) / 8 * 8;
  memory_.resize(5 * stride_);
}

void duration_scan(std::span<const Rates> batch, const Start& start, std::span<const double> length_s,
                   std::span<const double> dead_time_s, const Derivatives& out, std::span<Status> status, Workspace& workspace) {
  const std::size_t points = length_s.size();
  workspace.reserve(points);
  const Grid grid = find_grid(length_s);
  for (std::size_t set = 0; set < batch.size(); ++set) {
    const Rows rows = rows_of(out, set * points);
    fill(rows, points, kNaN);
    Problem problem;
    if (pose(batch[set], start, problem))
      scan_one(problem, length_s, dead_time_s.empty() ? 0.0 : dead_time_s[set], grid, rows, workspace);
    status[set] = finite(rows, points);
  }
}

void detuning_scan(std::span<const Rates> batch, const Start& start, std::span<const double> detuning,
                   std::span<const double> pulse_length_s, const Derivatives& out, std::span<Status> status,
                   Workspace& workspace) {
  static_cast<void>(workspace);  // blocks of fixed size serve so far
  const std::size_t points = detuning.size();
  for (std::size_t set = 0; set < batch.size(); ++set) {
    const Rows rows = rows_of(out, set * points);
    fill(rows, points, kNaN);
    Problem problem;
    if (pose(batch[set], start, problem)) line_one(problem, detuning, pulse_length_s[set], rows);
    status[set] = finite(rows, points);
  }
}

double population(const Rates& rates, const Start& start, double length_s) {
  Problem problem;
  if (!pose(rates, start, problem)) return kNaN;
  Wanted wanted{};
  wanted[kValueRow] = true;
  double values[kRowCount] = {};
  at_one(problem, wanted, length_s < 0 ? 0.0 : length_s, values);
  return std::isfinite(values[kValueRow]) ? values[kValueRow] : kNaN;
}

}  // namespace halfturn::dynamics
