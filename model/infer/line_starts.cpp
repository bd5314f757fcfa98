// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/starts.hpp"
#include "model/quantity/constants.hpp"

/// Starting points of detuning scans.
namespace halfturn::infer {
namespace {

using constants::kPi;
using constants::kTwoPi;

// In units of 2 pi over the pulse length, of which the line of a pi pulse is 0.8 wide: the profile's table, the trial offsets, and
// how far beyond the window a line is looked for. Linear interpolation in the table is good to 1e-3 at areas to 4.5 pi.
constexpr double kTableStep = 0.02, kOffsetStep = 0.15, kMargin = 0.5;
constexpr double kMostOffsets = 4000.0;
constexpr double kMostTable = 20000.0;

/// The population's profile on an even axis about the line's centre.
struct Profile {
  std::span<const double> population;
  double step = 0.0, half = 0.0;

  double at(double detuning) const {
    const double place = detuning / step + half;
    const auto left = static_cast<std::size_t>(std::clamp(place, 0.0, static_cast<double>(population.size() - 2)));
    const double share = place - static_cast<double>(left);
    return population[left] * (1.0 - share) + population[left + 1] * share;
  }
};

std::vector<double> trial_areas(const Prior& prior, double length) {
  std::vector<double> areas;
  if (prior.log_rabi && prior.log_rabi->sigma < 0.3)
    for (const double z : {-2.0, 0.0, 2.0}) areas.push_back(std::exp(prior.log_rabi->mean + z * prior.log_rabi->sigma) * length);
  else
    for (double area = 0.3; area < 4.6; area += 0.2) areas.push_back(area * kPi);
  return areas;
}

/// The two signals solved for at one offset; the gain stays 0 where they cannot be.
Mode solve_offset(const LinearPoints& points, const Profile& profile, double offset) {
  double w1 = 0, wy = 0, p1 = 0, pp = 0, py = 0;
  for (std::size_t i = 0; i < points.time.size(); ++i) {
    const double w = points.weight[i], wp = w * profile.at(points.time[i] - offset);
    w1 += w;
    wy += w * points.value[i];
    p1 += wp;
    pp += wp * wp / (w > 0.0 ? w : 1.0);
    py += wp * points.value[i];
  }
  Mode mode;
  const double determinant = w1 * pp - p1 * p1;
  if (!(determinant > 1e-12 * w1 * pp)) return mode;
  const double contrast = (w1 * py - p1 * wy) / determinant;
  mode.gain = contrast * contrast * determinant / w1;
  mode.start.line_offset = offset;
  mode.start.signal_ground = (wy - contrast * p1) / w1;
  mode.start.signal_excited = mode.start.signal_ground + contrast;
  return mode;
}

/// Appends the local maxima of the gain over the offset.
void search_offsets(const LinearPoints& points, const Profile& profile, const Prior& prior, double low, double high, double step,
                    const Mode& what, std::vector<Mode>& found) {
  Mode previous, current;
  auto take_peak = [&](double next_gain) {
    if (current.gain > previous.gain && current.gain >= next_gain) found.push_back(current);
  };
  for (double offset = low; offset <= high; offset += step) {
    Mode mode = solve_offset(points, profile, offset);
    if (!sign_admitted(prior, mode.start.contrast())) mode.gain = 0.0;
    mode.damped = what.damped;
    mode.start.generalised = what.start.generalised;
    mode.start.dead_time = what.start.dead_time;
    mode.start.damping = what.start.damping;
    take_peak(mode.gain);
    previous = current;
    current = mode;
  }
  take_peak(0.0);
}

std::size_t keep_distinct(std::vector<Mode>& found, std::span<Mode> modes, double length, Readout::Kind kind) {
  std::sort(found.begin(), found.end(), [](const Mode& a, const Mode& b) { return a.gain > b.gain; });
  std::size_t kept = 0;
  for (const Mode& mode : found) {
    if (kept == modes.size() || mode.gain < kept_above(found.front().gain)) break;
    const auto near = [&](const Mode& other) {
      return std::abs(other.start.line_offset - mode.start.line_offset) < kTwoPi * 0.3 / length &&
             std::abs(other.start.generalised - mode.start.generalised) < 0.5 / length && other.damped == mode.damped;
    };
    if (std::any_of(modes.begin(), modes.begin() + static_cast<std::ptrdiff_t>(kept), near)) continue;
    modes[kept] = mode;
    keep_signals_possible(kind, modes[kept++].start);
  }
  return kept;
}

}  // namespace

std::size_t line_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling, std::span<Mode> modes,
                        SearchWorkspace& work) {
  const auto n = scan.points();
  const double length = scan.pulse_length_s - prior.dead_time.mean;
  if (sampling.distinct < 4 || modes.empty() || !(length > 0.0)) return 0;
  work.reserve(n);
  linear_points(readout, {work.value.data(), n}, {work.weight.data(), n});
  const LinearPoints points{scan.axis, {work.value.data(), n}, {work.weight.data(), n}, 0.0};
  const auto [first, last] = std::minmax_element(scan.axis.begin(), scan.axis.end());

  const double unit = kTwoPi / length, margin = kMargin * unit;
  const double half = std::min(kMostTable, std::ceil((sampling.span + margin) / (kTableStep * unit)) + 2.0);
  work.table.resize(2 * static_cast<std::size_t>(half) + 1);
  work.table_axis.resize(work.table.size());
  for (std::size_t i = 0; i < work.table.size(); ++i) work.table_axis[i] = (static_cast<double>(i) - half) * kTableStep * unit;
  const Profile profile{work.table, kTableStep * unit, half};

  work.found.clear();
  for (const double damping : {0.0, 1.5 / length})
    for (const double area : trial_areas(prior, length)) {
      Mode what;
      what.damped = damping > 0.0;
      what.start.generalised = area / length;
      what.start.dead_time = prior.dead_time.mean;
      what.start.damping = damping;
      const dynamics::Rates rates{what.start.generalised, 0.0, prior.decay, prior.loss, damping};
      dynamics::Derivatives out;
      out.population = work.table;
      dynamics::Status status = dynamics::Status::ok;
      dynamics::detuning_scan({&rates, 1}, prior.start, work.table_axis, {&length, 1}, out, {&status, 1}, work.dynamics);
      if (status != dynamics::Status::ok) continue;
      search_offsets(points, profile, prior, *first - margin, *last + margin, std::max(kOffsetStep * unit, sampling.span / kMostOffsets), what,
                     work.found);
    }
  return keep_distinct(work.found, modes, length, readout.kind);
}

}  // namespace halfturn::infer
