// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <vector>

#include "model/dynamics/ensemble.hpp"
#include "model/infer/candidate.hpp"
#include "model/infer/prior.hpp"
#include "model/infer/scan.hpp"
#include "model/infer/solver.hpp"

/// The negative log likelihood of one scan under one candidate, with the priors, as a function of the free parameters.
namespace halfturn::infer {

/// What a scan's signal depends on. The signal is signal_ground + (signal_excited - signal_ground) * population.
struct Physical {
  /// Duration scans: sqrt(Omega^2 + Delta^2), rad/s; detuning scans: Omega, rad/s; of an ensemble with its peak (thermal: bare) coupling
  /// and its mean detuning. Amplitude scans: the rotation on resonance per amplitude where that is small, rad, so the coupling per
  /// amplitude times the effective length.
  double generalised = 0.0;
  double detuning_square = 0.0;  // duration and amplitude scans: Delta^2 (they see no more of Delta), rad^2/s^2
  double line_offset = 0.0;      // detuning scans: where the line lies from the carrier, rad/s
  double dead_time = 0.0;        // s
  double signal_ground = 0.0;
  double signal_excited = 1.0;
  double damping = 0.0;          // the candidate's free rate, 1/s; of two the decay or the leak
  double dephasing = 0.0;        // of candidates with two rates, 1/s
  double breadth = 0.0;          // of an ensemble: the square of Ensemble::parameter (spread, doppler, cloud), for the signal is
                                 // linear in that where it is small; thermal: mean phonons
  double drift = 0.0;            // relative change of the coupling along the scan
  double compression = 0.0;      // amplitude scans: q of amplitude_response.hpp
  double second_share = 0.0;     // of a second component (Prior::second): its part of the population, (1 - share) first + share second
  double second_place = 0.0;     // its coupling over the first one's (duration scans), or how far above the first its line lies, rad/s

  double rabi() const;           // bare, peak coupling, rad/s; not of an amplitude scan
  double contrast() const { return signal_excited - signal_ground; }
};

/// The coordinate in place of `generalised`: itself, the bare coupling, itself averaged over the ensemble's couplings, or the length of the best pulse
/// of a given angle (dynamics::best_pulse_phase); any of them, with the others, says what the scan depends on. One is chosen so
/// that its profile is an interval of that quantity.
/// Of amplitude scans: itself, the coupling per amplitude where that is small, or the amplitude of a pulse of a given angle.
struct Lead {
  enum class Kind : std::uint8_t { generalised, bare, mean, pulse_length, per_amplitude, pulse_amplitude } kind = Kind::generalised;
  double angle_rad = 0.0;    // pulse_length, pulse_amplitude
  double area_factor = 1.0;  // pulse_length, pulse_amplitude
  double length_s = 0.0;     // pulse_amplitude: the pulse's commanded length
};

/// Positions of the free parameters in the solver's vector; -1 where one is held.
struct Layout {
  int lead = -1, line_offset = -1, detuning_square = -1, dead_time = -1, ground = -1, excited = -1, damping = -1, dephasing = -1,
      breadth = -1, drift = -1, compression = -1, second_share = -1, second_place = -1;
  int count = 0;
};

/// The largest of some lengths; 0 of none.
double longest_of(std::span<const double> axis);

/// How much faster than its coupling, rad/s, a flop of this variance of the detuning (rad^2/s^2) seems to oscillate over the longest
/// length: the mean of exp(i delta^2 t / (2 Omega)) turns by atan(variance t / Omega) / 2, to first order in variance over Omega^2.
double doppler_shift(double rabi, double variance, double longest_s);

/// Arrays for the evaluations of scans of up to the reserved number of points; the caller keeps it, nothing allocates after
/// `reserve`.
struct ObjectiveWorkspace {
  void reserve(std::size_t points);
  std::vector<double> population, signal, score, information;
  std::array<std::vector<double>, dynamics::kRateCount> by_rate;
  std::vector<double> by_length, by_parameter;
  std::vector<double> second, second_over_first, second_by_place;  // of a second component: its population less the first's; its derivative
  std::vector<double> played;    // lengths as they act under a drift
  std::vector<dynamics::Rates> sets;        // amplitude scans: those of each point
  std::vector<dynamics::Status> statuses;
  std::vector<double> jacobian;  // [parameter][point], the signal's derivatives
  dynamics::Workspace dynamics;
  dynamics::EnsembleWorkspace ensemble;
};

class ScanObjective final : public Objective {
 public:
  /// `scan`, `readout`, `prior` and `workspace` must outlive the objective. `negative_contrast` says which reference is the
  /// ground state's. `held` gives the values of the parameters that are not free.
  ScanObjective(const ScanBatch& scan, const Readout& readout, const Prior& prior, Dynamics candidate, Lead lead,
                bool negative_contrast, ObjectiveWorkspace& workspace);

  bool evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const override;

  const Layout& layout() const { return layout_; }
  Bounds bounds() const;
  Vector pack(const Physical& physical) const;
  Physical unpack(const Vector& x) const;
  dynamics::Rates rates(const Physical& physical) const;  // of an amplitude scan at its largest amplitude
  dynamics::Rates rates_at(const Physical& physical, double amplitude) const;  // amplitude scans
  dynamics::Ensemble ensemble(const Physical& physical) const;
  /// The ensemble's mean coupling over the peak one.
  double mean_factor(const Physical& physical) const;
  /// The frequency, rad/s, at which a scan to the longest length seems to oscillate: the phase reached over that length. Of a spread
  /// the mean coupling; for doppler see doppler_shift; of a cloud or a thermal state, whose couplings are distributed nearly as
  /// x0 - m y with y as exp(-y), the mean of exp(i x Omega t) has the phase x0 Omega t - atan(m Omega t). Of an amplitude scan the
  /// rotation at its largest amplitude over that amplitude, rad.
  double apparent_frequency(const Physical& physical) const;
  const Prior& prior() const { return prior_; }
  const ScanBatch& scan() const { return scan_; }
  Dynamics candidate() const { return candidate_; }

  /// A minimum found with the generalised frequency as lead, and what it stands for, in this objective's coordinates: gradient and
  /// information by the chain rule, which costs a tenth of an evaluation. Not of amplitude scans.
  Minimum in_coordinates(const Minimum& minimum, const Physical& physical) const;

  /// Derivatives of the lead coordinate by the coordinates that have the generalised frequency in its place. Not of amplitude scans.
  Vector lead_by_generalised(const Physical& physical) const;

  /// The part of the value that comes from the scan's points alone, without references and priors, and the signal at each
  /// point. False where it cannot be computed.
  bool data_part(const Physical& physical, double& half_deviance, std::span<double> signal) const;

  /// The signal at each point with a band of +-z standard errors from the covariance of x.
  bool draw(const Vector& x, const Matrix& covariance, double z, std::span<double> signal, std::span<double> low,
            std::span<double> high) const;

  /// Information of the scan's points alone (no references, no priors) at x.
  bool data_information(const Vector& x, Matrix& information) const;

 private:
  /// A factor between the lead coordinate and the coupling, and its derivative by Physical::breadth: the phase of the best pulse, or
  /// the mean coupling over the peak one. NaN where there is none.
  struct Factor {
    double value, by_breadth;
  };
  Factor lead_factor(const Physical& physical) const;

  /// Derivatives of the generalised frequency by what it follows from.
  struct LeadSlopes {
    double by_lead = 1.0, by_dead_time = 0.0, by_square = 0.0, by_breadth = 0.0;
  };
  LeadSlopes lead_slopes(const Physical& physical) const;

  std::size_t damped_rate() const;
  bool populate(const Physical& physical, bool derivatives) const;
  dynamics::Status populate_amplitudes(const Physical& physical, const dynamics::Derivatives& out) const;
  void fill_amplitude_columns(const Physical& physical) const;
  double effective_length(const Physical& physical) const { return scan_.pulse_length_s - physical.dead_time; }
  double amplitude_lead(const Physical& physical) const;
  double from_amplitude_lead(double lead, const Physical& physical) const;
  dynamics::Status populate_one(const Physical& physical, const dynamics::Rates& rates, const dynamics::Derivatives& out, bool derivatives) const;
  dynamics::Status add_second(const Physical& physical, const dynamics::Derivatives& out, bool derivatives) const;
  dynamics::Status populate_ensemble(const Physical& physical, const dynamics::Rates& rates, std::span<const double> axis,
                                     const dynamics::Derivatives& out, bool derivatives) const;
  std::span<const double> played(const Physical& physical) const;
  std::span<double> column(int parameter) const;
  void fill_columns(const Physical& physical) const;
  void fill_lengths(const Physical& physical, double dead_time_by_rabi) const;
  void accumulate(const Physical& physical, Vector* gradient, Matrix* information) const;
  bool add_references(const Physical& physical, double& value, Vector* gradient, Matrix* information) const;
  bool add_priors(const Physical& physical, double& value, Vector* gradient, Matrix* information) const;

  const ScanBatch& scan_;
  const Readout& readout_;
  const Prior& prior_;
  Dynamics candidate_;
  Lead lead_;
  bool negative_contrast_;
  Layout layout_;
  ObjectiveWorkspace& work_;
  mutable double factor_at_ = -1.0;  // the breadth at which `factor_` was computed last
  mutable Factor factor_{1.0, 0.0};
};

}  // namespace halfturn::infer
