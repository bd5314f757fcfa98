// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <array>
#include <cmath>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/solution.hpp"
#include "model/quantity/constants.hpp"

/// Starting points of scans of the drive amplitude. The oscillation begins at amplitude 0 with a known phase, and saturation
/// stretches it: for each trial compression and rotation per amplitude the two signals are solved for.
namespace halfturn::infer {
namespace {

using constants::kTwoPi;

// Parts of the coupling lost at the largest amplitude that are tried. Between neighbours a fit of ten cycles finds its way
// (amplitude_test, "every rotation and compression").
constexpr std::array<double, 5> kLost = {0.0, 0.07, 0.15, 0.25, 0.4};

/// Sums for the two signals, floor and contrast, by weighted least squares.
struct Sums {
  double w = 0.0, p = 0.0, pp = 0.0, y = 0.0, py = 0.0;
};

struct Peak {
  double rotation = 0.0, compression = 0.0, gain = 0.0;
};

class AmplitudeSearch {
 public:
  AmplitudeSearch(const ScanBatch& scan, const Prior& prior, SearchWorkspace& work)
      : scan_(scan), prior_(prior), work_(work), largest_(*std::max_element(scan.axis.begin(), scan.axis.end())) {
    work_.table.resize(scan.points());
  }

  double compression(double lost) const { return (1.0 / ((1.0 - lost) * (1.0 - lost)) - 1.0) / (largest_ * largest_); }

  /// The amplitudes as a linear drive would need them, for the evaluations that follow.
  void set_compression(double compression) {
    compression_ = compression;
    for (std::size_t i = 0; i < scan_.points(); ++i) work_.table[i] = compressed(scan_.axis[i], compression);
  }

  /// The weighted sum of squares taken off a flat line; 0 where there is no oscillation to solve for.
  double gain(double rotation) const {
    const Sums s = sums(rotation);
    const double determinant = s.w * s.pp - s.p * s.p;
    if (!(determinant > 1e-12 * s.w * s.pp)) return 0.0;
    const double along = s.w * s.py - s.p * s.y;
    return along * along / (determinant * s.w);
  }

  void add_peaks(const TrialGrid& grid, std::vector<Peak>& peaks) const {
    std::vector<double> gains(static_cast<std::size_t>(grid.count));
    for (int k = 0; k < grid.count; ++k) gains[static_cast<std::size_t>(k)] = gain(grid.at(k));
    for (std::size_t k = 0; k < gains.size(); ++k) {
      const bool above_left = k == 0 || gains[k] > gains[k - 1], above_right = k + 1 == gains.size() || gains[k] >= gains[k + 1];
      if (above_left && above_right && gains[k] > 0.0) peaks.push_back({grid.at(static_cast<int>(k)), compression_, gains[k]});
    }
  }

  bool start(const Peak& peak, Readout::Kind kind, Physical& start) {
    set_compression(peak.compression);
    const Sums s = sums(peak.rotation);
    const double determinant = s.w * s.pp - s.p * s.p;
    if (!(determinant > 1e-12 * s.w * s.pp)) return false;
    const double contrast = (s.w * s.py - s.p * s.y) / determinant;
    if (contrast == 0.0 || !sign_admitted(prior_, contrast)) return false;
    start = Physical{};
    start.generalised = peak.rotation;
    start.compression = peak.compression;
    start.dead_time = std::min(prior_.dead_time.mean, 0.5 * scan_.pulse_length_s);
    start.signal_ground = (s.y - contrast * s.p) / s.w;
    start.signal_excited = start.signal_ground + contrast;
    keep_signals_possible(kind, start);
    return true;
  }

  /// Rotation per amplitude as the whole scan shows it.
  double apparent(const Peak& peak) const { return peak.rotation * compressed(largest_, peak.compression) / largest_; }

 private:
  Sums sums(double rotation) const {
    Sums s;
    const bool ground = prior_.start.prepared == dynamics::Prepared::ground;
    for (std::size_t i = 0; i < scan_.points(); ++i) {
      const double flop = 0.5 - 0.5 * std::cos(rotation * work_.table[i]);
      const double p = ground ? flop : 1.0 - flop, w = work_.weight[i];
      s.w += w;
      s.p += w * p;
      s.pp += w * p * p;
      s.y += w * work_.value[i];
      s.py += w * p * work_.value[i];
    }
    return s;
  }

  const ScanBatch& scan_;
  const Prior& prior_;
  SearchWorkspace& work_;
  double largest_ = 0.0, compression_ = 0.0;
};

/// Highest first; of those of one apparent rotation and compression the highest alone.
void keep_distinct(const AmplitudeSearch& search, std::vector<Peak>& peaks, double width) {
  std::sort(peaks.begin(), peaks.end(), [](const Peak& a, const Peak& b) { return a.gain > b.gain; });
  const double least = peaks.empty() ? 0.0 : kept_above(peaks.front().gain);
  std::vector<Peak> kept;
  for (const Peak& peak : peaks) {
    const bool near = std::any_of(kept.begin(), kept.end(), [&](const Peak& other) {
      const bool both = (other.compression > 0.0) == (peak.compression > 0.0);
      return both && std::abs(search.apparent(other) - search.apparent(peak)) < width;
    });
    if (!near && peak.gain >= least) kept.push_back(peak);
  }
  peaks = std::move(kept);
}

}  // namespace

std::size_t amplitude_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                             std::span<Mode> modes, SearchWorkspace& work) {
  const auto n = scan.points();
  if (sampling.distinct < 4 || modes.empty()) return 0;
  work.reserve(n);
  linear_points(readout, {work.value.data(), n}, {work.weight.data(), n});
  if (std::all_of(work.weight.begin(), work.weight.begin() + static_cast<std::ptrdiff_t>(n), [](double w) { return w == 0.0; })) return 0;
  AmplitudeSearch search(scan, prior, work);
  std::vector<Peak> peaks;
  for (const double lost : kLost) {
    search.set_compression(search.compression(lost));
    search.add_peaks(trial_grid(prior, sampling, n * kLost.size()), peaks);
  }
  keep_distinct(search, peaks, 0.7 * kTwoPi / sampling.span);
  if (prior.log_rabi)
    // What history knows is always among the modes, however many others fit as well.
    for (const double lost : {kLost[2], kLost[0]}) {
      search.set_compression(search.compression(lost));
      const double rotation = std::exp(prior.log_rabi->mean);
      peaks.insert(peaks.begin(), {rotation, search.compression(lost), search.gain(rotation)});
    }
  std::size_t found = 0;
  for (const Peak& peak : peaks) {
    Mode mode{{}, false, peak.gain};
    if (found < modes.size() && search.start(peak, readout.kind, mode.start)) modes[found++] = mode;
  }
  return found;
}

}  // namespace halfturn::infer
