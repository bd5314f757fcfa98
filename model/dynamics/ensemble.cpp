// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/ensemble.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

#include "model/dynamics/basis.hpp"
#include "model/dynamics/ensemble_flop.hpp"
#include "model/dynamics/members.hpp"
#include "model/quantity/elementary.hpp"

namespace halfturn::dynamics {
namespace {

using namespace detail;
using Kind = Ensemble::Kind;

constexpr std::size_t kChunk = 8;  // members evaluated at a time: seven rows of 60 points of each stay in the first cache
// Costs of one member, in units of merging one level into one member (motion.hpp): that takes some 0.5 ns, a two-level scan
// with derivatives some 0.3 us and 5 ns a point, a member of a flop in closed form 0.7 ns a point on an even grid and 3 ns on
// another (bench_dynamics).
constexpr double kScanCost = 600, kScanPointCost = 10, kEvenPointCost = 1.4, kPointCost = 6;

/// A scan of either kind: `point` holds lengths or detunings, `other` the dead time or the pulse length.
struct Scan {
  bool line;
  std::span<const double> point;
  double other;
};

/// All outputs of one call.
struct Outputs {
  const Derivatives& rows;
  std::span<double> by_parameter;

  template <class Function>
  void each(const Function& function) const {
    function(rows.population);
    for (const auto& row : rows.by_rate) function(row);
    function(rows.by_length);
    function(by_parameter);
  }
  void fill(double value) const {
    each([value](std::span<double> row) { std::fill(row.begin(), row.end(), value); });
  }
  bool finite() const {
    bool good = true;
    each([&good](std::span<double> row) { good = good && all_finite(row.data(), row.size()); });
    return good;
  }
};

/// A share of the atoms, which begin in one way.
struct Part {
  Start start;
  double share;
};

double longest_of(const Scan& scan) {
  double longest = scan.line ? scan.other : 0;
  if (!scan.line)
    for (double length : scan.point) longest = std::max(longest, length - scan.other);
  return std::max(longest, 0.0);
}

/// Whether a derivative by a damping is asked for.
bool wants_damping(const Derivatives& rows) {
  return !rows.by_rate[kByDecay].empty() || !rows.by_rate[kByLoss].empty() || !rows.by_rate[kByDephasing].empty();
}

bool closed_form(const Rates& rates, const Ensemble& ensemble, const Scan& scan, const Outputs& out, double longest) {
  return !scan.line && ensemble.kind != Kind::doppler && rates.detuning == 0 && rates.decay == 0 && rates.loss == 0 &&
         rates.dephasing == 0 && !wants_damping(out.rows) && std::abs(rates.rabi) * longest <= elementary::kLargestPhase;
}

void add(std::span<double> out, double factor, const double* values) {
  for (std::size_t k = 0; k < out.size(); ++k) out[k] += factor * values[k];
}

/// Adds `part.share` of a resonant undamped flop.
void add_flop(const Rates& rates, const Ensemble& ensemble, const Part& part, const Scan& scan, const Outputs& out,
              EnsembleWorkspace& workspace) {
  const std::size_t points = scan.point.size();
  if (workspace.lengths.size() < points) workspace.lengths.resize(points);
  if (workspace.rows.size() < 3 * points) workspace.rows.resize(3 * points);
  double* t = workspace.lengths.data();
  const FlopRows rows{workspace.rows.data(), workspace.rows.data() + points, workspace.rows.data() + 2 * points};
  for (std::size_t k = 0; k < points; ++k) t[k] = std::max(scan.point[k] - scan.other, 0.0);
  if (ensemble.kind == Kind::spread) {
    spread_flop(rates.rabi, ensemble.parameter, t, points, rows);
  } else {
    const Grid grid = find_grid(scan.point);  // increasing, where even: pulses of no length stand first
    std::size_t none = 0;
    while (grid.even && none < points && scan.point[none] - scan.other < 0) ++none;
    for (double* row : {rows.fall, rows.by_theta, rows.by_parameter}) std::fill_n(row, none, 0.0);
    members_flop(rates.rabi, workspace.members, t + none, grid.even ? grid.step : 0, points - none, workspace.scratch,
                 {rows.fall + none, rows.by_theta + none, rows.by_parameter + none});
  }
  const bool from_excited = part.start.prepared == Prepared::excited;
  const double excited = from_excited ? 1 - part.start.impurity : part.start.impurity;
  const double factor = 0.5 * part.share * (1 - 2 * excited);
  for (double& value : out.rows.population) value += part.share * excited;
  add(out.rows.population, factor, rows.fall);
  add(out.by_parameter, factor, rows.by_parameter);
  const auto by_rabi = out.rows.by_rate[kByRabi];
  for (std::size_t k = 0; k < by_rabi.size(); ++k) by_rabi[k] += factor * t[k] * rows.by_theta[k];
  for (std::size_t k = 0; k < out.rows.by_length.size(); ++k)
    if (scan.point[k] - scan.other >= 0) out.rows.by_length[k] += factor * rates.rabi * rows.by_theta[k];
}

/// Rows of kChunk members at a time, for what is asked for and what the derivative by the parameter needs.
struct Chunk {
  std::span<double> population, by_length;
  std::array<std::span<double>, kRateCount> by_rate;
};

Chunk chunk_rows(const Ensemble& ensemble, const Outputs& out, std::size_t points, EnsembleWorkspace& workspace) {
  const std::size_t size = kChunk * points;
  if (workspace.rows.size() < 7 * size) workspace.rows.resize(7 * size);
  const auto row = [&](int index, bool wanted) {
    return wanted ? std::span(workspace.rows).subspan(static_cast<std::size_t>(index) * size, size) : std::span<double>();
  };
  const bool by = !out.by_parameter.empty();
  Chunk chunk;
  chunk.population = row(0, !out.rows.population.empty() || (by && ensemble.kind == Kind::thermal));
  for (int rate = 0; rate < kRateCount; ++rate) chunk.by_rate[rate] = row(1 + rate, !out.rows.by_rate[rate].empty());
  if (by && (ensemble.kind == Kind::spread || ensemble.kind == Kind::cloud)) chunk.by_rate[kByRabi] = row(1 + kByRabi, true);
  if (by && ensemble.kind == Kind::doppler) chunk.by_rate[kByDetuning] = row(1 + kByDetuning, true);
  chunk.by_length = row(6, !out.rows.by_length.empty());
  return chunk;
}

/// Adds member `index`, which stands in row `at` of the chunk.
void add_member(const Rates& rates, const Members& members, std::size_t index, double share, const Chunk& chunk, std::size_t at,
                const Outputs& out) {
  const auto row = [at](std::span<double> rows, std::size_t points) { return rows.empty() ? nullptr : rows.data() + at * points; };
  const double weight = share * members.weight[index], scale = members.scale[index];
  const auto sum = [&](std::span<double> to, double factor, std::span<double> from) {
    if (!to.empty() && !from.empty() && factor != 0) add(to, factor, row(from, to.size()));
  };
  sum(out.rows.population, weight, chunk.population);
  for (int rate = 0; rate < kRateCount; ++rate)
    sum(out.rows.by_rate[rate], rate == kByRabi ? weight * scale : weight, chunk.by_rate[rate]);
  sum(out.rows.by_length, weight, chunk.by_length);
  sum(out.by_parameter, share * members.by_weight[index], chunk.population);
  sum(out.by_parameter, weight * members.by_scale[index] * rates.rabi, chunk.by_rate[kByRabi]);
  sum(out.by_parameter, weight * members.by_shift[index], chunk.by_rate[kByDetuning]);
}

/// Adds `part.share` of the members' two-level populations.
Status add_members(const Rates& rates, const Ensemble& ensemble, const Part& part, const Scan& scan, const Outputs& out,
                   EnsembleWorkspace& workspace) {
  const Members& members = workspace.members;
  const std::size_t points = scan.point.size();
  const Chunk chunk = chunk_rows(ensemble, out, points, workspace);
  workspace.batch.resize(kChunk);
  std::array<double, kChunk> other;
  std::array<Status, kChunk> status;
  other.fill(scan.other);
  for (std::size_t begin = 0; begin < members.size(); begin += kChunk) {
    const std::size_t count = std::min(kChunk, members.size() - begin);
    for (std::size_t i = 0; i < count; ++i) {
      workspace.batch[i] = rates;
      workspace.batch[i].rabi *= members.scale[begin + i];
      workspace.batch[i].detuning += members.shift[begin + i];
    }
    const std::span<const Rates> batch(workspace.batch.data(), count);
    const Derivatives rows{chunk.population, chunk.by_rate, chunk.by_length};
    if (scan.line) {
      detuning_scan(batch, part.start, scan.point, other, rows, status, workspace.two_level);
    } else {
      duration_scan(batch, part.start, scan.point, other, rows, status, workspace.two_level);
    }
    for (std::size_t i = 0; i < count; ++i) {
      if (status[i] != Status::ok) return status[i];
      add_member(rates, members, begin + i, part.share, chunk, i, out);
    }
  }
  return Status::ok;
}

/// Atoms that begin in g and in e see different couplings where a sideband is driven; else one part holds all.
std::size_t parts_of(const Ensemble& ensemble, const Start& start, Part (&parts)[2]) {
  bool sideband = false;
  if (ensemble.kind == Kind::thermal)
    for (const Mode& mode : ensemble.modes) sideband = sideband || mode.sideband != 0;
  parts[0] = {start, 1};
  if (!sideband || start.impurity == 0) return 1;
  const Prepared other = start.prepared == Prepared::ground ? Prepared::excited : Prepared::ground;
  parts[0] = {{start.prepared, 0, start.lost_reads}, 1 - start.impurity};
  parts[1] = {{other, 0, start.lost_reads}, start.impurity};
  return 2;
}

Status add_part(const Rates& rates, const Ensemble& ensemble, const Part& part, const Scan& scan, const Outputs& out,
                EnsembleWorkspace& workspace) {
  Demand demand;
  demand.longest_s = longest_of(scan);
  demand.coupling_phase = std::abs(rates.rabi) * demand.longest_s;
  demand.halved = !scan.line && rates.detuning == 0;
  demand.excited = part.start.prepared == Prepared::excited;
  const bool closed = closed_form(rates, ensemble, scan, out, demand.longest_s);
  const double points = static_cast<double>(scan.point.size());
  demand.cost = kScanCost + kScanPointCost * points;
  if (closed) demand.cost = (find_grid(scan.point).even ? kEvenPointCost : kPointCost) * points;
  if (!closed || ensemble.kind != Kind::spread) {
    const Status status = choose_members(ensemble, demand, workspace);
    if (status != Status::ok) return status;
  }
  if (!closed) return add_members(rates, ensemble, part, scan, out, workspace);
  add_flop(rates, ensemble, part, scan, out, workspace);
  return Status::ok;
}

Status mean_scan(const Rates& rates, const Ensemble& ensemble, const Start& start, const Scan& scan, const Outputs& out,
                 EnsembleWorkspace& workspace) {
  if (!valid(ensemble) || !std::isfinite(scan.other)) return Status::not_finite;
  if (!all_finite(scan.point.data(), scan.point.size())) return Status::not_finite;
  Part parts[2];
  const std::size_t count = parts_of(ensemble, start, parts);
  out.fill(0);
  for (std::size_t i = 0; i < count; ++i) {
    const Status status = add_part(rates, ensemble, parts[i], scan, out, workspace);
    if (status != Status::ok) return status;
  }
  const auto by_detuning = out.rows.by_rate[kByDetuning];
  if (ensemble.kind == Kind::doppler && !scan.line && rates.detuning == 0) std::fill(by_detuning.begin(), by_detuning.end(), 0.0);
  return out.finite() ? Status::ok : Status::not_finite;
}

void mean_or_nan(const Rates& rates, const Ensemble& ensemble, const Start& start, const Scan& scan, const Outputs& out,
                 Status& status, EnsembleWorkspace& workspace) {
  status = mean_scan(rates, ensemble, start, scan, out, workspace);
  if (status != Status::ok) out.fill(std::numeric_limits<double>::quiet_NaN());
}

}  // namespace

void ensemble_duration_scan(const Rates& rates, const Ensemble& ensemble, const Start& start, std::span<const double> length_s,
                            double dead_time_s, const Derivatives& out, std::span<double> by_parameter, Status& status,
                            EnsembleWorkspace& workspace) {
  if (ensemble.kind != Ensemble::Kind::none) {
    mean_or_nan(rates, ensemble, start, {false, length_s, dead_time_s}, {out, by_parameter}, status, workspace);
    return;
  }
  duration_scan({&rates, 1}, start, length_s, {&dead_time_s, 1}, out, {&status, 1}, workspace.two_level);
  std::fill(by_parameter.begin(), by_parameter.end(), 0.0);
}

void ensemble_detuning_scan(const Rates& rates, const Ensemble& ensemble, const Start& start, std::span<const double> detuning,
                            double pulse_length_s, const Derivatives& out, std::span<double> by_parameter, Status& status,
                            EnsembleWorkspace& workspace) {
  if (ensemble.kind != Ensemble::Kind::none) {
    mean_or_nan(rates, ensemble, start, {true, detuning, pulse_length_s}, {out, by_parameter}, status, workspace);
    return;
  }
  detuning_scan({&rates, 1}, start, detuning, {&pulse_length_s, 1}, out, {&status, 1}, workspace.two_level);
  std::fill(by_parameter.begin(), by_parameter.end(), 0.0);
}

}  // namespace halfturn::dynamics
