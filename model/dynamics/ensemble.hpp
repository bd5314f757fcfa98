// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>

#include "model/dynamics/ensemble_memory.hpp"
#include "model/dynamics/two_level.hpp"

/// The driven two-level system averaged over shots or atoms that differ in coupling or detuning.
///
/// - spread: coupling Omega (1 + parameter h), h standard normal; parameter = relative standard deviation.
/// - doppler: detuning Delta + parameter h, h standard normal; parameter = standard deviation, rad/s.
/// - cloud: a Gaussian cloud in a Gaussian beam; parameter = sigma/w, the cloud's standard deviation in one direction across
///   the beam over the beam's 1/e^2 intensity radius. Omega is the coupling on the axis; x = coupling/Omega has the density
///   kappa x^(kappa-1) on 0...1, kappa = w^2/(2 sigma^2), or w^2/(4 sigma^2) where the coupling follows the intensity, as in
///   two-photon drives. Source: x = exp(-r^2/w^2) or exp(-2 r^2/w^2) of the exponentially distributed r^2.
/// - thermal: motional modes in thermal states; parameter = mean phonon number of a mode of phonon_ratio 1. Omega is the bare
///   coupling; from level n to n + s it is Omega exp(-eta^2/2) eta^|s| sqrt(n_<!/n_>!) L_{n_<}^{|s|}(eta^2) with n_<, n_> the
///   lesser and greater of n and n + s, and zero where n + s < 0; the weight of n is nbar^n/(nbar+1)^(n+1); with several modes
///   factors and weights multiply. Source: D. Leibfried, R. Blatt, C. Monroe, D. Wineland, Rev. Mod. Phys. 75, 281 (2003),
///   Eq. (70) (its number from memory) and the thermal distribution of the same section. The motion begins thermal in whichever internal state the atom begins; from e, sideband s leads from
///   n to n - s. Motion is not followed through decays.
///
/// Accuracy: |error of a mean population| < 1e-9; of a derivative by a rate < 1e-9 of the longest effective length, by length
/// < 1e-9 of the largest rate, by the parameter < 1e-9 of Omega times the longest length (spread, cloud), of that length
/// (doppler), or of 1 (thermal); all beside the errors of two_level.hpp, up to kMostMembers members. Over
/// 3000 random flops of up to 48 cycles closed forms and members differed by at most 2e-11 of populations and 1.1e-10 of these
/// scales (spread; 1e-13 for clouds and thermal states, whose members are the same).
/// Closed forms (Delta = 0, no damping and no derivative by a damping): spread exact; thermal sums; cloud as below.
/// Else members are chosen by the phase a over which they differ, t being the longest effective length: a population is, as a
/// function of Omega or of Delta, band-limited to t, so the rules' errors are those on cos(a h) or cos(a x).
/// - spread (a = parameter Omega t), doppler (a = parameter t): 4, 8, 12 or 16 points of Gauss and Hermite up to a = 2.3, else
///   the trapezoidal rule to 6.7 standard deviations with 15 + 2.2 a points (half of them for doppler at Delta = 0);
/// - cloud (a = Omega t): Gauss and Legendre, 16 + 0.32 a points up to sigma/w = 0.35 (0.25 with the intensity); beyond it the
///   second term grows with sigma/w, and there are up to 17 sigma/w more points;
/// - thermal: the levels down to a weight of 1e-12, 28 (nbar + 1/2) of them; where fewer serve, Chebyshev interpolation in x
///   over the span of couplings x, a + 8 a^(1/3) + 8 points, a = Omega t (span of x)/2.
namespace halfturn::dynamics {

/// A motional mode seen by the drive.
struct Mode {
  double lamb_dicke = 0;    // eta, at least 0
  int sideband = 0;         // phonons gained from g to e; at most 20 either way
  double phonon_ratio = 1;  // its mean phonon number over the ensemble's parameter, at least 0
};

struct Ensemble {
  enum class Kind { none, spread, doppler, cloud, thermal };
  Kind kind = Kind::none;
  double parameter = 0;            // at least 0; its meaning by kind: see above
  bool follows_intensity = false;  // cloud: the coupling goes with the intensity, not the field
  std::span<const Mode> modes;     // thermal: at least one
};

/// Members beyond which an ensemble is not averaged: 2000 cycles in a cloud, a = 1900 of a Gaussian spread.
inline constexpr std::size_t kMostMembers = 4096;
/// The same for the levels of one mode, or the product of two modes' members: 2300 mean phonons.
inline constexpr std::size_t kMostLevels = 65536;

/// The mean population seen after a pulse of each length of a scan, with derivatives; as duration_scan with a batch of one.
/// Given: `dead_time_s`, s, either sign. Each span of `out` that is not empty, and `by_parameter` (derivative by
/// Ensemble::parameter; 0 for Kind::none), has one entry a length. The derivative by Rates::rabi is that by Omega above.
/// Status: not_finite as in two_level.hpp, and for an ensemble outside the ranges above (outputs are NaN); too_many_members
/// where more members or levels would be needed than the limits above (outputs are NaN).
/// Takes nothing from the heap once the workspace has met an ensemble and a scan as large.
void ensemble_duration_scan(const Rates& rates, const Ensemble& ensemble, const Start& start, std::span<const double> length_s,
                            double dead_time_s, const Derivatives& out, std::span<double> by_parameter, Status& status,
                            EnsembleWorkspace& workspace);

/// The mean population seen after a pulse of fixed length at each drive detuning of a scan; as detuning_scan with a batch of
/// one, and otherwise as above.
void ensemble_detuning_scan(const Rates& rates, const Ensemble& ensemble, const Start& start, std::span<const double> detuning,
                            double pulse_length_s, const Derivatives& out, std::span<double> by_parameter, Status& status,
                            EnsembleWorkspace& workspace);

/// A number and its derivative by Ensemble::parameter; both NaN where there is none.
struct OfParameter {
  double value, by_parameter;
};

/// The phase Omega (t - dead time), rad, of the pulse that turns the ensemble by `angle_rad` best: the maximum of the mean of
/// cos(x phase - angle) that grows out of phase = angle as the parameter grows from 0 (of a thermal state: out of angle over
/// the lowest coupled level's factor). Atoms start in g. Relative error < 1e-10.
/// doppler and none: the angle itself, as the mean is over couplings. NaN for an angle that is negative or not finite, an
/// ensemble out of range or too large, where nothing couples, and where that maximum has ceased to be, which
/// happens in wide ensembles: for pi on a carrier of eta = 0.2 it is gone at nbar = 50.
OfParameter best_pulse_phase(const Ensemble& ensemble, double angle_rad, EnsembleWorkspace& workspace);

/// The phase Omega t, rad, at which the magnitude of the mean of exp(i x Omega t), which is the oscillation's envelope on resonance, has
/// fallen to 1/e for the first time; relative error < 1e-6. Infinite where it does not within a thousand cycles; NaN for none and
/// doppler, whose envelope on resonance is no such mean, and for an ensemble out of range.
double fading_phase(const Ensemble& ensemble, EnsembleWorkspace& workspace);

/// The mean of |x|, the ensemble's mean coupling over Omega; 1 for spread and doppler. Atoms start in g. |error| < 1e-11.
OfParameter mean_coupling(const Ensemble& ensemble, EnsembleWorkspace& workspace);

}  // namespace halfturn::dynamics
