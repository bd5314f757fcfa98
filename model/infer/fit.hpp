// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <limits>
#include <optional>
#include <span>
#include <string_view>
#include <vector>

#include "model/infer/conditioning.hpp"
#include "model/infer/scan_objective.hpp"
#include "model/infer/starts.hpp"

/// The inference: from scans and what is known beforehand to estimates, intervals and the figures by which they are judged.
namespace halfturn::infer {

inline constexpr double kUnknown = std::numeric_limits<double>::quiet_NaN();

/// A value with its standard error and interval at the level asked for; NaN where one does not exist, and then `why`.
struct Estimate {
  double value = kUnknown, sigma = kUnknown, low = kUnknown, high = kUnknown;
  std::string_view why = {};
};

/// A pulse whose length is wanted, or of a scan of amplitudes its amplitude: its angle, its shape's area over peak times length,
/// and the commanded length that it has where its amplitude is wanted (0: it is not).
struct PulseAngle {
  double angle_rad = 0.0;
  double area_factor = 1.0;
  double length_s = 0.0;
};

struct FitOptions {
  double level = 0.95;           // of the intervals
  double second_level = 0.0;     // of Fit::second; 0: none
  double rival_margin = 25.0;    // deviance within which another mode is a rival
  double least_evidence = 30.0;  // deviance to be gained over a flat line, below which no interval is given (shown.hpp)
  std::vector<PulseAngle> pulses;
};

enum class FitOutcome : std::uint8_t {
  fitted,
  too_few_points,  // fewer measured points than parameters and two, or fewer than 7, or at fewer than 5 places
  not_converged,   // no start led to a minimum
};

struct CandidateScore {
  Dynamics dynamics = Dynamics::undamped;
  double aicc = kUnknown;
  double weight = 0.0;  // Akaike weight among the candidates of the chosen mode; they sum to 1
};

/// The next best mode that `expect` and the sampling allow: another frequency (or line), or the same with the contrast's other sign.
struct RivalMode {
  double frequency = 0.0;    // rad/s: generalised Rabi frequency, or line offset; rad per amplitude
  double deviance_above = 0.0;
  bool opposite_contrast = false;
};

/// A second component that puts the answer in doubt (second_component.hpp).
struct SecondComponent {
  double first = 0.0, second = 0.0;  // rad/s: the two Rabi frequencies (as `generalised`), or the offsets of the two lines
  double share = 0.0;                // flops: the second one's part of the atoms; lines: its depth over the first one's
  double gain = 0.0;                 // deviance gained over the one that was fitted, scatter left by two divided out
};

/// Scans of a joint fit that say different things: what leaving the shared values would gain them all, and which gains most.
struct Disagreement {
  double deviance = 0.0, p_value = 1.0;  // together; chi-square with `dof` by chance
  int dof = 0;
  std::size_t scan = 0;  // the one that gains most, and how much
  double of_scan = 0.0;
};

struct FitQuality {
  double deviance = kUnknown, dof = kUnknown;
  double p_value = kUnknown;        // of a deviance as large, moment-matched; before scatter is counted
  double scatter = 1.0;             // variance of the residuals over the readout's own; above 1 where p_value < 0.1, in full where < 0.01
  double p_after_scatter = kUnknown;  // smallest p-value of runs, autocorrelation, furthest residual and left-over oscillation, with scatter counted
  double cycles = kUnknown;         // seen within the span, lower end of the interval; duration and amplitude scans
  double over_flat = kUnknown;      // deviance gained over a flat line, scatter counted
  double over_monotone = kUnknown;  // over the best monotone curve of any shape, scatter counted
  double monotone_gain = kUnknown;  // deviance that the best monotone curve gains over a flat line; where nothing could be fitted
  double range_low = kUnknown, range_high = kUnknown;  // rad/s (rad per amplitude): what the sampling and `expect` allow
  double line_width = kUnknown;     // rad/s, full width at half maximum; detuning scans
  int points = 0;                   // measured
  std::vector<int> distrusted;      // indices of the points that are more probably outliers than not; all above is told without them
  double p_together = 1.0;            // of their standing so close together along the axis, were they strewn at random
  std::vector<double> distrusted_at;  // where on the axis, s or rad/s
  bool outside_expect = false;
  bool by_history = false;          // history decided among modes that fit alike
  bool dead_time_released = false;  // the data contradicted the dead time's prior, which was set aside
  bool readout_released = false;    // the same of floor and contrast
  bool dead_time_doubted = false;   // the data contradicted the dead time of the scans before: Prior::dead_time_otherwise was taken
  std::optional<RivalMode> rival;
  Conditioning conditioning;        // of the chosen candidate
  std::optional<SecondComponent> second;
  // Of joint fits: how the scans agree, the scan of which scatter and residuals are told, and that of the distrusted points.
  std::optional<Disagreement> disagreement;
  std::optional<std::size_t> of_scan, distrusted_of;
  Axis distrusted_axis = Axis::duration;  // of which distrusted_at is told
  int distrusted_points = 0;              // measured in that scan
};

/// Estimates of the same solution with intervals at another level, where one is asked for.
struct SecondIntervals {
  Estimate line_offset;                  // rad/s
  std::vector<Estimate> pulse_length_s;  // as FitOptions::pulses; duration scans
};

struct Fit {
  FitOutcome outcome = FitOutcome::not_converged;
  Axis axis = Axis::duration;
  Sampling sampling;
  double lowest = 0.0, longest = 0.0;  // the smallest and the largest value on the axis
  double scan_pulse_s = 0.0;           // commanded length of the pulses of a detuning or amplitude scan
  Dynamics chosen = Dynamics::undamped;
  std::array<CandidateScore, kDynamicsCount> candidates{};
  int candidate_count = 0;

  Physical physical;            // of the chosen candidate
  dynamics::Rates rates;        // of the chosen candidate; of an amplitude scan at its largest amplitude
  Vector x;                     // its free parameters, generalised lead
  Matrix covariance;            // of x, scatter counted
  bool negative_contrast = false;
  Prior prior;                  // under which it was fitted: the one given, less what the data contradicted
  bool detuning_felt = true;    // whether its detuning was large enough to be a parameter
  double outlier_share = 0.0;   // the share of outliers that the likelihood allowed for (outliers.hpp); 0: none
  double dispersion = 1.0;      // Readout::dispersion of the likelihood

  Estimate rabi;                // rad/s, bare and peak
  Estimate rabi_mean;           // rad/s, of the ensemble
  Estimate generalised;         // rad/s, on the carrier as it stands, the mean of the ensemble; of an amplitude scan rad per amplitude (Physical)
  Estimate rabi_per_amplitude;  // rad/s per amplitude, bare, where the amplitude is small; amplitude scans
  Estimate compression;         // part of the coupling lost at the largest amplitude of a scan of amplitudes; below 0: gained
  Estimate line_offset;         // rad/s
  Estimate decay_s, dephasing_s, loss_s, envelope_s;
  Estimate contrast, floor, dead_time_s;
  Known dead_time_points{kUnknown, kUnknown};  // s, what the points alone say of it, without its prior; NaN where they say little
  Estimate breadth;             // of a chosen ensemble its Ensemble::parameter (model/dynamics/ensemble.hpp): relative, rad/s, or phonons
  Estimate drift;               // relative change of the coupling along the scan, where one was found
  double mean_factor = 1.0;     // mean coupling over the peak one
  std::vector<Estimate> pulse_length_s;  // as FitOptions::pulses; duration scans
  std::vector<Estimate> pulse_amplitude;  // as FitOptions::pulses; amplitude scans
  SecondIntervals second;
  FitQuality quality;

  /// Of the pulses of a detuning or amplitude scan, s.
  double effective_length_s() const { return scan_pulse_s - physical.dead_time; }
};

/// Working memory of the inference; one a thread.
struct FitWorkspace {
  ObjectiveWorkspace objective;
  SearchWorkspace search;
  std::vector<double> signal, order, progress;
};

/// Fits each site of a batch under its own prior (`priors` has one a site). `fits` has one a site.
void fit(const ScanBatch& scans, std::span<const Prior> priors, const FitOptions& options, std::span<Fit> fits, FitWorkspace& workspace);

/// The fitted curve of a fit on any axis, with a pointwise band of +-`z` standard errors (delta method on the information
/// matrix of the chosen candidate). Arrays as long as the axis. False where there is no fit.
bool overlay(const ScanBatch& scan, const Fit& fit, std::span<const double> axis, double z, std::span<double> signal, std::span<double> low,
             std::span<double> high);

/// The population seen after a pulse of this effective length (s), under the fitted dynamics. NaN where it cannot be computed.
double population_after(const Fit& fit, const dynamics::Start& start, double length_s);

}  // namespace halfturn::infer
