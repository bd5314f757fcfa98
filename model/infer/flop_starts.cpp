// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <array>
#include <cmath>

#include "model/infer/solution.hpp"
#include "model/quantity/constants.hpp"

/// Starting points of duration scans.
namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// Trial frequencies stand this part of one over the span apart: a fit started half a step off its mode stays on it
// (fit_test, "every phase and frequency").
constexpr double kFrequencyStep = 0.2;
// Most products of a frequency and a point: half a second.
constexpr double kMostWork = 4e7;
constexpr double kMostFrequencies = 2e6;
// Free dampings tried, times the span: none, mild, one that leaves a cycle or two; and how many steps of the grid are taken at a
// time, without damping and with one. A damped peak is broader, and what starts on its flank climbs it (fit_test, "every phase and frequency").
constexpr std::array<double, 3> kDampings = {0.0, 1.2, 4.0};
constexpr std::array<int, 2> kCoarser = {1, 2};
// The undamped oscillation explains at least 0.48 of what one that falls by exp(-4) does (the square of the mean envelope over the mean
// square), so that where it explains less than this part of what is kept, damping is not tried.
constexpr double kDampedShare = 0.3;
// Below so many cycles phase and amplitude cannot be told apart by a linear solve, and starts with the phase held are added.
constexpr double kSlowCycles = 2.0;
constexpr std::array<double, 5> kSlowStarts = {0.3, 0.5, 0.75, 1.0, 1.4};  // cycles

struct Peak {
  double frequency = 0.0, damping = 0.0;  // the latter beyond what is known
  LinearFit fit;
};

/// Highest first, each further from those before it than their resolution.
void keep_distinct(std::vector<Peak>& peaks, double width) {
  std::sort(peaks.begin(), peaks.end(), [](const Peak& a, const Peak& b) { return a.fit.gain > b.fit.gain; });
  std::size_t kept = 0;
  for (const Peak& peak : peaks) {
    const auto near = [&](const Peak& other) { return std::abs(other.frequency - peak.frequency) < width; };
    if (std::none_of(peaks.begin(), peaks.begin() + static_cast<std::ptrdiff_t>(kept), near)) peaks[kept++] = peak;
  }
  peaks.resize(kept);
}

/// The local maxima of the gain over frequency at some dampings, `coarser` steps of the grid at a time, appended to `peaks`.
void add_peaks(const LinearPoints& points, TrialGrid grid, int coarser, double known_damping, double span, std::span<const double> free_dampings,
               std::span<const char> wanted, FrequencySearch& search, std::vector<Peak>& peaks) {
  grid.step *= coarser;
  grid.count = (grid.count + coarser - 1) / coarser;
  std::array<double, kDampings.size()> dampings;
  for (std::size_t d = 0; d < free_dampings.size(); ++d) dampings[d] = known_damping + free_dampings[d] / span;
  search_frequencies(points, grid, {dampings.data(), free_dampings.size()}, search, wanted);
  const auto count = static_cast<std::size_t>(grid.count);
  const auto last = search.gain.begin() + static_cast<std::ptrdiff_t>(count * free_dampings.size());
  const double least = kept_above(*std::max_element(search.gain.begin(), last));
  for (std::size_t d = 0; d < free_dampings.size(); ++d) {
    const double* const gain = search.gain.data() + d * count;
    for (std::size_t k = 0; k < count; ++k) {
      const bool above_left = k == 0 || gain[k] > gain[k - 1], above_right = k + 1 == count || gain[k] >= gain[k + 1];
      if (!above_left || !above_right || gain[k] < least) continue;
      const double frequency = grid.at(static_cast<int>(k));
      peaks.push_back({frequency, free_dampings[d] / span, solve_linear(points, frequency, dampings[d])});
      // What decays in the coefficients refers to the first point; a pulse's own decay begins at length 0.
      const double rescale = std::exp(dampings[d] * points.origin);
      for (const std::size_t j : {1, 2, 3}) peaks.back().fit.coefficients[j] *= rescale;
    }
  }
}

/// Which trials of the coarser grid are tried with a damping: those whose gain without one, or a neighbour's, is no small part of the best.
std::vector<char> worth_damping(const std::vector<double>& gain, int coarser) {
  const double least = kDampedShare * kept_above(*std::max_element(gain.begin(), gain.end()));
  const auto step = static_cast<std::size_t>(coarser);
  std::vector<char> wanted((gain.size() + step - 1) / step, 0);
  for (std::size_t k = 0; k < gain.size(); ++k)
    if (gain[k] >= least)
      for (std::size_t at = k / step - (k >= step ? 1 : 0); at <= k / step + 1 && at < wanted.size(); ++at) wanted[at] = 1;
  return wanted;
}

/// All that are worth a fit.
std::vector<Peak> find_peaks(const LinearPoints& points, const TrialGrid& grid, double known_damping, double span, FrequencySearch& search) {
  std::vector<Peak> peaks;
  const std::span<const double> dampings(kDampings);
  add_peaks(points, grid, kCoarser[0], known_damping, span, dampings.first(1), {}, search, peaks);
  const auto wanted = worth_damping(search.gain, kCoarser[1]);
  add_peaks(points, grid, kCoarser[1], known_damping, span, dampings.subspan(1), wanted, search, peaks);
  double most = 0.0;
  for (const Peak& peak : peaks) most = std::max(most, peak.fit.gain);
  const double least = kept_above(most);
  peaks.erase(std::remove_if(peaks.begin(), peaks.end(), [least](const Peak& peak) { return peak.fit.gain < least; }), peaks.end());
  keep_distinct(peaks, 0.7 * kTwoPi / span);
  return peaks;
}

/// Delta^2 that would take so much from a contrast that is known, within what its prior allows.
double missing_contrast(const Prior& prior, double frequency, double contrast) {
  if (!prior.contrast || !prior.detuning || prior.contrast->sigma >= 0.2) return 0.0;
  const double missing = std::clamp(1.0 - std::abs(contrast / prior.contrast->mean), 0.0, 0.8);
  const double most = std::abs(prior.detuning->mean) + 4.0 * prior.detuning->sigma;
  return std::min(missing * frequency * frequency, most * most);
}

/// The start that a peak stands for with a contrast of this sign; false where priors rule it out.
bool physical_from(const Peak& peak, double sign, const Prior& prior, Readout::Kind kind, Physical& start) {
  const auto& c = peak.fit.coefficients;
  const double amplitude = std::hypot(c[1], c[2]);
  if (!(amplitude > 0.0) || !sign_admitted(prior, sign)) return false;
  // From g the signal is middle - (contrast / 2) e cos(W t - phase), from e the sign is the other.
  const double swing = prior.start.prepared == dynamics::Prepared::ground ? -sign : sign;
  const double phase = std::atan2(swing * c[2], swing * c[1]), period = kTwoPi / peak.frequency;
  double dead = phase / peak.frequency;
  dead -= period * std::round((dead - prior.dead_time.mean) / period);
  const double reach = 6.0 * prior.dead_time.sigma, off = dead - prior.dead_time.mean;
  // A fit pulls a phase that the prior cannot hold back to its edge; half a period's error is the other sign's affair.
  if (std::abs(off) > std::max(reach, 0.3 * period)) return false;
  start = Physical{};
  start.generalised = peak.frequency;
  start.dead_time = prior.dead_time.mean + std::clamp(off, -0.5 * reach, 0.5 * reach);
  start.damping = peak.damping;
  const double contrast = 2.0 * sign * amplitude, middle = c[0] + c[3];
  start.detuning_square = missing_contrast(prior, peak.frequency, contrast);
  start.signal_ground = middle - 0.5 * contrast;
  start.signal_excited = start.signal_ground + contrast / (1.0 - start.detuning_square / (peak.frequency * peak.frequency));
  keep_signals_possible(kind, start);
  return true;
}

/// A start of so few cycles with the dead time held at its prior, where only the two signals are solved for.
bool slow_start(const LinearPoints& points, const Prior& prior, Readout::Kind kind, double frequency, Physical& start) {
  start = Physical{};
  start.generalised = frequency;
  start.dead_time = prior.dead_time.mean;
  const bool ground = prior.start.prepared == dynamics::Prepared::ground;
  StraightLine signals;  // of the population
  for (std::size_t i = 0; i < points.time.size(); ++i) {
    const double flop = 0.5 - 0.5 * std::cos(frequency * std::max(0.0, points.time[i] - start.dead_time));
    signals.add(points.weight[i], points.value[i], ground ? flop : 1.0 - flop);
  }
  if (!signals.solvable()) return false;
  const double contrast = signals.slope();
  if (contrast == 0.0 || !sign_admitted(prior, contrast)) return false;
  start.signal_ground = signals.intercept();
  start.signal_excited = start.signal_ground + contrast;
  keep_signals_possible(kind, start);
  return true;
}

}  // namespace

TrialGrid trial_grid(const Prior& prior, const Sampling& sampling, std::size_t points) {
  double top = sampling.limit;
  if (prior.expect) top = std::max(top, 1.25 * prior.expect->high);
  TrialGrid grid{kTwoPi * 0.1 / sampling.span, kTwoPi * kFrequencyStep / sampling.span, 0};
  const double most = std::min(kMostFrequencies, std::max(500.0, kMostWork / static_cast<double>(points)));
  grid.count = static_cast<int>(std::min(most, std::floor(std::max(0.0, top - grid.bottom) / grid.step) + 2.0));
  return grid;
}

std::size_t duration_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                            std::span<Mode> modes, SearchWorkspace& work) {
  const auto n = scan.points();
  if (modes.empty() || !take_points(readout, sampling, work)) return 0;
  const LinearPoints points{scan.axis, {work.value.data(), n}, {work.weight.data(), n}, *std::min_element(scan.axis.begin(), scan.axis.end())};
  // A known decay damps the oscillation at 3/4 of its rate (Torrey 1949, resonance), a loss at half.
  const double known_damping = 0.75 * prior.decay + 0.5 * prior.loss;
  const auto peaks = find_peaks(points, trial_grid(prior, sampling, n), known_damping, sampling.span, work.frequencies);

  std::size_t found = 0;
  if (prior.log_rabi) {
    // What history knows is always among the modes, however many others fit as well.
    const double frequency = std::exp(prior.log_rabi->mean);
    const Peak known{frequency, 0.0, solve_linear(points, frequency, known_damping)};
    for (const double sign : {1.0, -1.0}) {
      Mode mode{{}, false, known.fit.gain};
      if (known.fit.gain > 0.0 && found < modes.size() && physical_from(known, sign, prior, readout.kind, mode.start)) modes[found++] = mode;
    }
  }
  // Random lengths make of a slow flop a peak at many a high frequency: the slow starts have their places beside those.
  const double slow = kSlowCycles * kTwoPi / sampling.span;
  const bool may_be_slow = peaks.empty() || std::any_of(peaks.begin(), peaks.end(), [slow](const Peak& peak) { return peak.frequency <= slow; });
  const std::size_t room = modes.size() - (may_be_slow ? std::min(modes.size(), kSlowStarts.size()) : 0);
  for (const Peak& peak : peaks)
    for (const double sign : {1.0, -1.0}) {
      Mode mode{{}, peak.damping > 0.0, peak.fit.gain};
      if (found < room && physical_from(peak, sign, prior, readout.kind, mode.start)) modes[found++] = mode;
    }
  if (!may_be_slow && found > 0) return found;
  for (const double cycles : kSlowStarts) {
    Mode mode;
    if (found < modes.size() && slow_start(points, prior, readout.kind, kTwoPi * cycles / sampling.span, mode.start)) modes[found++] = mode;
  }
  return found;
}

}  // namespace halfturn::infer
