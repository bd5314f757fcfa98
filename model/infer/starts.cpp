// SPDX-License-Identifier: Apache-2.0
#include "model/infer/starts.hpp"

#include <algorithm>
#include <array>
#include <cmath>

#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

using constants::kPi;
using constants::kTwoPi;

// Trial frequencies stand this part of one over the span apart: a fit started half a step off its mode stays on it
// (fit_test, "every phase and frequency").
constexpr double kFrequencyStep = 0.15;
constexpr int kMostFrequencies = 20000;
// Free dampings tried, times the span: none, mild, one that leaves a cycle or two.
constexpr std::array<double, 3> kDampings = {0.0, 1.2, 4.0};
// Modes are kept down to the larger of these below the best: the linear solve is not the likelihood.
constexpr double kKeptBelow = 60.0;
constexpr double kKeptShare = 0.3;

/// Normal equations of a linear solve in up to 4 terms, by Cholesky with a ridge of 1e-9 that only collinear terms feel.
struct Normal {
  std::array<std::array<double, 4>, 4> m{};
  std::array<double, 4> right{};
  int size = 0;

  bool solve(std::array<double, 4>& x) const {
    std::array<std::array<double, 4>, 4> l{};
    for (int i = 0; i < size; ++i)
      for (int j = 0; j <= i; ++j) {
        double sum = m[i][j] * (i == j ? 1.0 + 1e-9 : 1.0);
        for (int k = 0; k < j; ++k) sum -= l[i][k] * l[j][k];
        if (i == j) {
          if (!(sum > 0.0)) return false;
          l[i][i] = std::sqrt(sum);
        } else {
          l[i][j] = sum / l[j][j];
        }
      }
    for (int i = 0; i < size; ++i) {
      x[i] = right[i];
      for (int k = 0; k < i; ++k) x[i] -= l[i][k] * x[k];
      x[i] /= l[i][i];
    }
    for (int i = size - 1; i >= 0; --i) {
      for (int k = i + 1; k < size; ++k) x[i] -= l[k][i] * x[k];
      x[i] /= l[i][i];
    }
    return true;
  }

  double explained(const std::array<double, 4>& x) const {
    double sum = 0.0;
    for (int i = 0; i < size; ++i) sum += right[i] * x[i];
    return sum;
  }
};

/// One trial: coefficients of 1, cos, sin (times the envelope) and of the envelope itself.
struct Trial {
  double frequency = 0.0, damping = 0.0, gain = -1.0;
  std::array<double, 4> coefficients{};
};

struct Grid {
  std::size_t n;
  const double *y, *w, *c, *s, *e;
  double total_weight, total_wy;
};

Trial solve_trial(const Grid& g, double frequency, double damping) {
  double e1 = 0, ce = 0, se = 0, cc = 0, cs = 0, ss = 0, yc = 0, ys = 0, ee = 0, eec = 0, ees = 0, ye = 0;
  for (std::size_t i = 0; i < g.n; ++i) {
    const double e = g.e[i], w = g.w[i], wy = w * g.y[i];
    const double c = g.c[i] * e, s = g.s[i] * e;
    ce += w * c;
    se += w * s;
    cc += w * c * c;
    cs += w * c * s;
    ss += w * s * s;
    yc += wy * c;
    ys += wy * s;
    e1 += w * e;
    ee += w * e * e;
    eec += w * e * c;
    ees += w * e * s;
    ye += wy * e;
  }
  Normal normal;
  normal.size = damping > 0.0 ? 4 : 3;
  normal.m = {{{g.total_weight, ce, se, e1}, {ce, cc, cs, eec}, {se, cs, ss, ees}, {e1, eec, ees, ee}}};
  normal.right = {g.total_wy, yc, ys, ye};
  Trial trial{frequency, damping, -1.0, {}};
  if (normal.solve(trial.coefficients))
    trial.gain = normal.explained(trial.coefficients) - g.total_wy * g.total_wy / g.total_weight;
  return trial;
}

/// Moves signals that a linear solve put where no signal can be.
void keep_signals_possible(Readout::Kind kind, Physical& start) {
  if (kind == Readout::Kind::binomial) {
    const double contrast = start.contrast();
    start.signal_ground = std::clamp(start.signal_ground, 0.005, 0.995);
    start.signal_excited = std::clamp(start.signal_excited, 0.005, 0.995);
    // Both at one end: a contrast must be left, or the fit has nothing to hold on to.
    if (start.signal_ground == start.signal_excited) start.signal_excited = start.signal_ground < 0.5 ? 0.5 : 0.5 * start.signal_ground;
    if (contrast * start.contrast() < 0.0) std::swap(start.signal_ground, start.signal_excited);
  } else if (kind == Readout::Kind::poisson) {
    const double least = 1e-3 * std::max(std::abs(start.signal_ground), std::abs(start.signal_excited));
    start.signal_ground = std::max(start.signal_ground, least);
    start.signal_excited = std::max(start.signal_excited, least);
  }
}

/// The start that a trial stands for, with the sign of the contrast asked for; false where priors rule it out.
bool physical_from(const Trial& trial, bool negative, const ScanBatch& scan, const Prior& prior, Readout::Kind kind, Physical& out) {
  const auto& k = trial.coefficients;
  const double amplitude = std::hypot(k[1], k[2]);
  if (!(amplitude > 0.0) || scan.kind != Axis::duration) return false;
  const double sign = negative ? -1.0 : 1.0;
  const double begins = prior.start.prepared == dynamics::Prepared::ground ? 1.0 : -1.0;
  // signal = ... - sign * begins * amplitude * cos(W t - phase)
  const double phase = std::atan2(-sign * begins * k[2], -sign * begins * k[1]);
  const double period = kTwoPi / trial.frequency;
  double dead = phase / trial.frequency;
  dead -= period * std::round((dead - prior.dead_time.mean) / period);
  const double reach = 6.0 * prior.dead_time.sigma;
  // A fit pulls a phase that the prior cannot hold back to its edge; half a period's error is the other sign's affair.
  if (std::abs(dead - prior.dead_time.mean) > std::max(reach, 0.3 * period)) return false;
  out = Physical{};
  out.generalised = trial.frequency;
  out.dead_time = std::clamp(dead, prior.dead_time.mean - 0.5 * reach, prior.dead_time.mean + 0.5 * reach);
  out.damping = trial.damping;
  const double middle = k[0] + (trial.damping > 0.0 ? k[3] : 0.0);
  double contrast = 2.0 * sign * amplitude;
  if (prior.contrast) {
    const auto& known = *prior.contrast;
    if (known.mean * sign + kKeptBelow / 10.0 * known.sigma < 0.0) return false;
    if (prior.detuning && known.sigma < 0.2) {
      const double missing = 1.0 - std::abs(contrast / known.mean);
      const double most = std::abs(prior.detuning->mean) + 4.0 * prior.detuning->sigma;
      if (missing > 0.0) out.detuning_square = std::min(missing * trial.frequency * trial.frequency, most * most);
      out.detuning_square = std::min(out.detuning_square, 0.8 * trial.frequency * trial.frequency);
      contrast /= 1.0 - out.detuning_square / (trial.frequency * trial.frequency);
    }
  }
  out.signal_ground = middle - sign * amplitude;
  out.signal_excited = out.signal_ground + contrast;
  keep_signals_possible(kind, out);
  return true;
}

/// Starts of less than two cycles, whose phase and amplitude a linear solve cannot tell apart: the dead time is held at its
/// prior and only the two signals are solved for.
std::size_t add_slow_starts(const ScanBatch& scan, const Prior& prior, Readout::Kind kind, const Sampling& sampling, std::span<Mode> modes,
                            std::size_t found, const SearchWorkspace& work) {
  for (const double cycles : {0.3, 0.5, 0.75, 1.0, 1.4}) {
    if (found == modes.size()) break;
    Mode mode;
    auto& start = mode.start;
    start.generalised = kTwoPi * cycles / sampling.span;
    start.dead_time = prior.dead_time.mean;
    double w1 = 0, p1 = 0, pp = 0, wy = 0, py = 0;
    for (std::size_t i = 0; i < scan.points(); ++i) {
      const double p = 0.5 - 0.5 * std::cos(start.generalised * std::max(0.0, scan.axis[i] - start.dead_time)), w = work.weight[i];
      w1 += w;
      p1 += w * p;
      pp += w * p * p;
      wy += w * work.value[i];
      py += w * p * work.value[i];
    }
    const double determinant = w1 * pp - p1 * p1;
    if (!(determinant > 1e-12 * w1 * pp)) continue;
    double slope = (w1 * py - p1 * wy) / determinant;
    start.signal_ground = (wy - slope * p1) / w1;
    if (prior.start.prepared == dynamics::Prepared::excited) {
      start.signal_ground += slope;
      slope = -slope;
    }
    if (prior.contrast && slope * prior.contrast->mean < 0.0 && std::abs(prior.contrast->mean) > 6.0 * prior.contrast->sigma) continue;
    start.signal_excited = start.signal_ground + slope;
    if (slope != 0.0) {
      keep_signals_possible(kind, start);
      modes[found++] = mode;
    }
  }
  return found;
}

/// Keeps the best trial within `width` of each other's frequency.
void keep_distinct(std::vector<Trial>& peaks, double width) {
  std::sort(peaks.begin(), peaks.end(), [](const Trial& a, const Trial& b) { return a.gain > b.gain; });
  std::size_t kept = 0;
  for (const auto& peak : peaks) {
    bool known = false;
    for (std::size_t i = 0; i < kept; ++i) known = known || std::abs(peaks[i].frequency - peak.frequency) < width;
    if (!known) peaks[kept++] = peak;
  }
  peaks.resize(kept);
}

}  // namespace

void SearchWorkspace::reserve(std::size_t points) {
  for (auto* array : {&value, &weight, &cosine, &sine, &step_cosine, &step_sine, &envelope})
    if (array->size() < points) array->resize(points);
}

std::size_t duration_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                            std::span<Mode> modes, SearchWorkspace& work) {
  const auto n = scan.points();
  if (sampling.distinct < 4 || modes.empty()) return 0;
  work.reserve(n);
  linear_points(readout, {work.value.data(), n}, {work.weight.data(), n});
  double origin = scan.axis[0];
  for (const double t : scan.axis) origin = std::min(origin, t);

  double top = sampling.limit;
  if (prior.expect) top = std::max(top, 1.25 * prior.expect->high);
  const double step = kTwoPi * kFrequencyStep / sampling.span, bottom = kTwoPi * 0.1 / sampling.span;
  const int count = static_cast<int>(std::min<double>(kMostFrequencies, std::floor((top - bottom) / step) + 2.0));

  // A known decay damps the oscillation at 3/4 of its rate (Torrey 1949, resonance).
  const double known_damping = 0.75 * prior.decay + 0.5 * prior.loss;
  std::vector<Trial> peaks;
  for (const double extra : kDampings) {
    const double damping = known_damping + extra / sampling.span;
    double total_weight = 0.0, total_wy = 0.0;
    for (std::size_t i = 0; i < n; ++i) {
      const double t = scan.axis[i];
      work.cosine[i] = std::cos(bottom * t);
      work.sine[i] = std::sin(bottom * t);
      work.step_cosine[i] = std::cos(step * t);
      work.step_sine[i] = std::sin(step * t);
      work.envelope[i] = std::exp(-damping * (t - origin));
      total_weight += work.weight[i];
      total_wy += work.weight[i] * work.value[i];
    }
    if (!(total_weight > 0.0)) return 0;
    const Grid grid{n, work.value.data(), work.weight.data(), work.cosine.data(), work.sine.data(), work.envelope.data(),
                    total_weight, total_wy};
    Trial before, here = solve_trial(grid, bottom, damping);
    for (int k = 1; k <= count; ++k) {
      for (std::size_t i = 0; i < n; ++i) {  // every point's phasor turns by its own step
        const double c = work.cosine[i] * work.step_cosine[i] - work.sine[i] * work.step_sine[i];
        work.sine[i] = work.cosine[i] * work.step_sine[i] + work.sine[i] * work.step_cosine[i];
        work.cosine[i] = c;
      }
      const Trial next = k < count ? solve_trial(grid, bottom + step * k, damping) : Trial{};
      if (here.gain > before.gain && here.gain >= next.gain) {
        peaks.push_back(here);
        peaks.back().damping = extra / sampling.span;
        // What decays in the coefficients refers to the first point.
        const double rescale = std::exp(damping * origin);
        for (const int j : {1, 2, 3}) peaks.back().coefficients[j] *= damping > 0.0 ? rescale : 1.0;
      }
      before = here;
      here = next;
    }
  }
  keep_distinct(peaks, 0.7 * kTwoPi / sampling.span);
  std::size_t found = 0;
  for (const auto& peak : peaks) {
    if (peak.gain < peaks.front().gain - std::max(kKeptBelow, kKeptShare * peaks.front().gain)) break;
    for (const bool negative : {false, true}) {
      Mode mode{{}, peak.damping > 0.0, peak.gain};
      if (found < modes.size() && physical_from(peak, negative, scan, prior, readout.kind, mode.start)) modes[found++] = mode;
    }
  }
  const bool slow = found == 0 || peaks.front().frequency * sampling.span < 2.0 * kTwoPi;
  return slow ? add_slow_starts(scan, prior, readout.kind, sampling, modes, found, work) : found;
}

std::size_t line_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                        std::span<Mode> modes, SearchWorkspace& work) {
  const auto n = scan.points();
  const double length = scan.pulse_length_s - prior.dead_time.mean;
  if (sampling.distinct < 4 || modes.empty() || !(length > 0.0)) return 0;
  work.reserve(n);
  linear_points(readout, {work.value.data(), n}, {work.weight.data(), n});
  const auto [low, high] = std::minmax_element(scan.axis.begin(), scan.axis.end());

  // The profile is a function of axis minus offset: one table an area serves every offset. A fortieth of the width of a pi
  // pulse's line leaves interpolation errors of 1e-3 at areas to 4.5 pi.
  const double table_step = kTwoPi * 0.02 / length;
  const double offset_step = std::max(kTwoPi * 0.15 / length, sampling.span / 400.0);
  const double margin = kTwoPi * 0.5 / length;
  const double reach = sampling.span + margin;
  const auto half = static_cast<std::size_t>(std::min(20000.0, std::ceil(reach / table_step) + 2.0));
  const std::size_t table_size = 2 * half + 1;
  work.table.resize(table_size);
  work.table_axis.resize(table_size);
  for (std::size_t i = 0; i < table_size; ++i)
    work.table_axis[i] = (static_cast<double>(i) - static_cast<double>(half)) * table_step;

  std::vector<double> areas;
  if (prior.log_rabi && prior.log_rabi->sigma < 0.3)
    for (const double z : {-2.0, 0.0, 2.0}) areas.push_back(std::exp(prior.log_rabi->mean + z * prior.log_rabi->sigma) * length);
  else
    for (double area = 0.3; area < 4.6; area += 0.2) areas.push_back(area * kPi);

  double total_weight = 0.0, total_wy = 0.0;
  for (std::size_t i = 0; i < n; ++i) {
    total_weight += work.weight[i];
    total_wy += work.weight[i] * work.value[i];
  }
  if (!(total_weight > 0.0)) return 0;

  work.found.clear();
  for (const double damping : {0.0, 1.5 / length})
    for (const double area : areas) {
      const dynamics::Rates rates{area / length, 0.0, prior.decay, prior.loss, damping};
      dynamics::Derivatives out;
      out.population = work.table;
      dynamics::Status status = dynamics::Status::ok;
      dynamics::detuning_scan({&rates, 1}, prior.start, {work.table_axis.data(), table_size}, {&length, 1}, out, {&status, 1},
                              work.dynamics);
      if (status != dynamics::Status::ok) continue;
      Mode best_before, previous, current;
      for (double offset = *low - margin; offset <= *high + margin; offset += offset_step) {
        double p1 = 0, pp = 0, py = 0;
        for (std::size_t i = 0; i < n; ++i) {
          const double place = (scan.axis[i] - offset) / table_step + static_cast<double>(half);
          const auto left = static_cast<std::size_t>(std::clamp(place, 0.0, static_cast<double>(table_size - 2)));
          const double share = place - static_cast<double>(left);
          const double p = work.table[left] * (1.0 - share) + work.table[left + 1] * share;
          const double wp = work.weight[i] * p;
          p1 += wp;
          pp += wp * p;
          py += wp * work.value[i];
        }
        const double determinant = total_weight * pp - p1 * p1;
        if (!(determinant > 1e-12 * total_weight * pp)) continue;
        const double slope = (total_weight * py - p1 * total_wy) / determinant;
        if (prior.contrast && slope * prior.contrast->mean < 0.0 && std::abs(prior.contrast->mean) > 6.0 * prior.contrast->sigma) continue;
        Mode mode;
        mode.damped = damping > 0.0;
        mode.gain = slope * slope * determinant / total_weight;
        mode.start.generalised = rates.rabi;
        mode.start.line_offset = offset;
        mode.start.dead_time = prior.dead_time.mean;
        mode.start.damping = damping;
        mode.start.signal_ground = (total_wy - slope * p1) / total_weight;
        mode.start.signal_excited = mode.start.signal_ground + slope;
        if (current.gain > previous.gain && current.gain >= mode.gain) work.found.push_back(current);
        previous = current;
        current = mode;
      }
      if (current.gain > previous.gain) work.found.push_back(current);
    }
  std::sort(work.found.begin(), work.found.end(), [](const Mode& a, const Mode& b) { return a.gain > b.gain; });
  std::size_t found = 0;
  for (const auto& mode : work.found) {
    if (found == modes.size() || mode.gain < work.found.front().gain - std::max(kKeptBelow, kKeptShare * work.found.front().gain)) break;
    bool known = false;
    for (std::size_t i = 0; i < found; ++i)
      known = known || (std::abs(modes[i].start.line_offset - mode.start.line_offset) < kTwoPi * 0.3 / length &&
                        std::abs(modes[i].start.generalised - mode.start.generalised) < 0.5 / length &&
                        modes[i].damped == mode.damped);
    if (known) continue;
    modes[found] = mode;
    keep_signals_possible(readout.kind, modes[found++].start);
  }
  return found;
}

}  // namespace halfturn::infer
