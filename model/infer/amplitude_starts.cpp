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
constexpr std::array<double, 16> kLost = {-0.3, -0.2, -0.1, 0.0, 0.05, 0.1, 0.15, 0.2, 0.25, 0.3, 0.35, 0.4, 0.45, 0.5, 0.55, 0.6};
// What history knows is tried with a little loss and with much.
constexpr std::array<double, 2> kLostOfHistory = {0.25, 0.0};

struct Peak {
  double rotation = 0.0, compression = 0.0, gain = 0.0;
};

class AmplitudeSearch {
 public:
  AmplitudeSearch(const ScanBatch& scan, const Prior& prior, SearchWorkspace& work)
      : scan_(scan), prior_(prior), work_(work), largest_(*std::max_element(scan.axis.begin(), scan.axis.end())) {
    auto& f = work_.frequencies;
    for (auto* array : {&work_.table, &f.cosine, &f.sine, &f.turn_cosine, &f.turn_sine}) array->resize(scan.points());
  }

  double compression(double lost) const { return (1.0 / ((1.0 - lost) * (1.0 - lost)) - 1.0) / (largest_ * largest_); }

  /// The amplitudes as a linear drive would need them, for the evaluations that follow.
  void set_compression(double compression) {
    compression_ = compression;
    for (std::size_t i = 0; i < scan_.points(); ++i) work_.table[i] = compressed(scan_.axis[i], compression);
  }

  double gain(double rotation) const { return sums(rotation).gain(); }

  /// Local maxima of the gain. Every point's phasor turns by its own step from trial to trial.
  void add_peaks(const TrialGrid& grid, std::vector<Peak>& peaks) {
    auto& f = work_.frequencies;
    turn(grid.bottom, f.cosine, f.sine);
    turn(grid.step, f.turn_cosine, f.turn_sine);
    std::vector<double> gains(static_cast<std::size_t>(grid.count));
    for (double& gain : gains) gain = next_sums().gain();
    for (std::size_t k = 0; k < gains.size(); ++k) {
      const bool above_left = k == 0 || gains[k] > gains[k - 1], above_right = k + 1 == gains.size() || gains[k] >= gains[k + 1];
      if (above_left && above_right && gains[k] > 0.0) peaks.push_back({grid.at(static_cast<int>(k)), compression_, gains[k]});
    }
  }

  bool start(const Peak& peak, Readout::Kind kind, Physical& start) {
    set_compression(peak.compression);
    const StraightLine s = sums(peak.rotation);
    if (!s.solvable()) return false;
    // From g the signal is middle - (contrast / 2) cos, from e the sign is the other.
    const double contrast = prior_.start.prepared == dynamics::Prepared::ground ? -2.0 * s.slope() : 2.0 * s.slope();
    if (contrast == 0.0 || !sign_admitted(prior_, contrast)) return false;
    start = Physical{};
    start.generalised = peak.rotation;
    start.compression = peak.compression;
    start.dead_time = std::min(prior_.dead_time.mean, 0.5 * scan_.pulse_length_s);
    start.signal_ground = s.intercept() - 0.5 * contrast;
    start.signal_excited = start.signal_ground + contrast;
    keep_signals_possible(kind, start);
    return true;
  }

  /// Rotation per amplitude as the whole scan shows it.
  double apparent(const Peak& peak) const { return peak.rotation * compressed(largest_, peak.compression) / largest_; }

 private:
  void turn(double rotation, std::vector<double>& cosine, std::vector<double>& sine) const {
    for (std::size_t i = 0; i < scan_.points(); ++i) {
      cosine[i] = std::cos(rotation * work_.table[i]);
      sine[i] = std::sin(rotation * work_.table[i]);
    }
  }

  /// The sums at the phasors as they stand, which then take their step.
  StraightLine next_sums() {
    StraightLine s;
    auto& f = work_.frequencies;
    for (std::size_t i = 0; i < scan_.points(); ++i) {
      const double c = f.cosine[i], d = f.sine[i];
      s.add(work_.weight[i], work_.value[i], c);
      f.cosine[i] = c * f.turn_cosine[i] - d * f.turn_sine[i];
      f.sine[i] = d * f.turn_cosine[i] + c * f.turn_sine[i];
    }
    return s;
  }

  StraightLine sums(double rotation) const {
    StraightLine s;
    for (std::size_t i = 0; i < scan_.points(); ++i) s.add(work_.weight[i], work_.value[i], std::cos(rotation * work_.table[i]));
    return s;
  }

  const ScanBatch& scan_;
  const Prior& prior_;
  SearchWorkspace& work_;
  double largest_ = 0.0, compression_ = 0.0;
};

/// Highest first; of those of one apparent rotation the highest alone.
void keep_distinct(const AmplitudeSearch& search, std::vector<Peak>& peaks, double width) {
  std::sort(peaks.begin(), peaks.end(), [](const Peak& a, const Peak& b) { return a.gain > b.gain; });
  const double least = peaks.empty() ? 0.0 : kept_above(peaks.front().gain);
  std::vector<Peak> kept;
  for (const Peak& peak : peaks) {
    const auto like = [&](const Peak& other) { return std::abs(search.apparent(other) - search.apparent(peak)) < width; };
    const bool near = std::any_of(kept.begin(), kept.end(), like);
    if (!near && peak.gain >= least) kept.push_back(peak);
  }
  peaks = std::move(kept);
}

}  // namespace

std::size_t amplitude_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                             std::span<Mode> modes, SearchWorkspace& work) {
  const auto n = scan.points();
  if (modes.empty() || !take_points(readout, sampling, work)) return 0;
  AmplitudeSearch search(scan, prior, work);
  std::vector<Peak> peaks;
  for (const double lost : kLost) {
    search.set_compression(search.compression(lost));
    search.add_peaks(trial_grid(prior, sampling, n * kLost.size()), peaks);
  }
  keep_distinct(search, peaks, 0.7 * kTwoPi / sampling.span);
  if (prior.log_rabi)
    // What history knows is always among the modes, however many others fit as well.
    for (const double lost : kLostOfHistory) {
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
