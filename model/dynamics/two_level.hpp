// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstddef>
#include <span>
#include <vector>

/// Two levels, one classical drive, rotating-wave approximation. With Bloch vector (u, v), populations rho_ee and rho_gg,
/// W = rabi, D = detuning (drive minus transition), G = decay (e to g), L = loss (e out of the pair) and
/// g = (G + L)/2 + dephasing:
///
///     du/dt = -g u + D v                         d rho_ee/dt = -(W/2) v - (G + L) rho_ee
///     dv/dt = -D u - g v + W (rho_ee - rho_gg)   d rho_gg/dt = +(W/2) v + G rho_ee
///
/// Source: H. C. Torrey, Phys. Rev. 76, 1059 (1949), Eqs. (1)-(12), for the closed system; the loss out of the pair and
/// the quartic that comes with it are added here (modes.cpp).
///
/// Accuracy, for rabi/decay from 1e-3 to 1e3, |detuning| to 30 rabi and decay*length to 50, on either side of critical
/// damping and at it, even and uneven grids: |population error| < 1e-10; |derivative error| < 1e-7 of its scale, where the
/// scale of a derivative is its largest magnitude within the scan, but at least 1e-3 of the longest pulse length for a
/// derivative by a rate (a rate is felt through rate*length), and at least 1e-3 of the largest rate for one by length.
/// Over 2550 random sets of that range the largest errors against SciPy's matrix exponential are 3e-12 and 2e-10
/// (tests/model/dynamics/expm_test.cpp); over 25500 of another seed 8e-12 and 9e-10. Beyond it the rounding of the phase
/// limits: 4e-16 * rabi * length.
namespace halfturn::dynamics {

struct Rates {
  double rabi = 0;       // rad/s, Omega; its sign does not matter
  double detuning = 0;   // rad/s, drive minus transition
  double decay = 0;      // 1/s, e to g, at least 0
  double loss = 0;       // 1/s, e out of the pair, at least 0
  double dephasing = 0;  // 1/s, of the coherence beyond (decay + loss)/2, at least 0
};

inline constexpr int kRateCount = 5;
/// The order of derivatives by a rate, that of the members of Rates.
enum RateIndex : int { kByRabi = 0, kByDetuning = 1, kByDecay = 2, kByLoss = 3, kByDephasing = 4 };

enum class Prepared { ground, excited };
/// What an atom lost from the pair is read as: dark, population = rho_ee; bright, population = 1 - rho_gg.
enum class LostReads { dark, bright };

struct Start {
  Prepared prepared = Prepared::ground;
  double impurity = 0.0;  // fraction that begins in the other state, incoherently; 0 to 1
  LostReads lost_reads = LostReads::dark;
};

/// Where results go: arrays of batch*points, row-major [set][point]. An empty span is not computed.
struct Derivatives {
  std::span<double> population;
  std::array<std::span<double>, kRateCount> by_rate;  // s, d population / d rate
  std::span<double> by_length;                        // 1/s, d population / d effective length
};

/// The caller's memory, reused from call to call. It grows where a scan has more points than any before, and else an
/// evaluation takes nothing from the heap. One workspace serves one thread.
class Workspace {
 public:
  void reserve(std::size_t points);
  double* row(int index) { return memory_.data() + static_cast<std::size_t>(index) * stride_; }

 private:
  std::vector<double> memory_;
  std::size_t stride_ = 0;
};

/// The outcome of one parameter set: not_finite where any output is not a finite number, which happens for rates or
/// lengths that are not finite, for negative decay, loss or dephasing (outputs are NaN), and where numbers overflow. too_many_members is an outcome of
/// ensembles alone (ensemble.hpp).
enum class Status : unsigned char { ok, not_finite, too_many_members };

/// The population seen after a pulse of each length of a scan, for each parameter set, with derivatives.
/// Given: `length_s`, the commanded lengths (s, any order), common to the batch; `dead_time_s`, one a set (s, either sign),
/// or empty for none. The effective length is length - dead time; below 0 it counts as 0, and by_length is then 0.
/// by_length is the derivative by the effective length, so d/d(dead time) = -by_length.
/// `status` has one entry a set; every span that is not empty has batch*points entries.
/// A grid even to 2 ulp of its longest length is evaluated by a recurrence, which adds less than 1e-12 to populations, and to
/// derivatives in units of their scale, up to a phase of 1000 rad, and 1e-15 of the phase beyond.
void duration_scan(std::span<const Rates> batch, const Start& start, std::span<const double> length_s,
                   std::span<const double> dead_time_s, const Derivatives& out, std::span<Status> status, Workspace& workspace);

/// The population seen after a pulse of fixed length at each drive detuning of a scan, for each parameter set.
/// Given: `detuning`, the axis (rad/s, any order), common to the batch; `Rates::detuning` is the line's offset on that axis,
/// so the detuning at point k is detuning[k] - rates.detuning, and by_rate[kByDetuning] is the derivative by that offset
/// (minus the derivative by detuning); `pulse_length_s`, one a set, the effective length (s; below 0 it counts as 0).
/// Shapes, status and accuracy as for duration_scan. Points are computed by vector code, and one by one, some ten times
/// slower, where modes nearly meet (damping*length below about 1e-4, but not 0, with derivatives by a damping; overdamped lines' centres).
void detuning_scan(std::span<const Rates> batch, const Start& start, std::span<const double> detuning,
                   std::span<const double> pulse_length_s, const Derivatives& out, std::span<Status> status,
                   Workspace& workspace);

/// The population seen after one pulse of the effective length (s; below 0 it counts as 0). Takes nothing from the heap.
/// NaN where Status would be not_finite.
double population(const Rates& rates, const Start& start, double length_s);

}  // namespace halfturn::dynamics
