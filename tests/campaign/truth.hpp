// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <vector>

#include "plugin/rehearse/ensemble.hpp"

/// What is true of a simulated scan, by the integrator of plugin/rehearse alone: it shares nothing with model/dynamics.
namespace halfturn::campaign {

using rehearse::Ensemble;
using rehearse::Random;

/// The atoms, the drive and the readout of one scan. Angular rates in rad/s, decay rates in 1/s.
struct Apparatus {
  bool line = false;
  double rabi = 0;        // bare, peak coupling
  double detuning = 0;    // flops: drive minus transition; lines: where the line lies from the carrier
  double decay = 0, loss = 0, dephasing = 0;
  double dead_time = 0;   // s
  double pulse_s = 0;     // lines: commanded length
  double ground = 0, excited = 1;  // signal of either state
  Ensemble ensemble;      // undamped only
  double second_weight = 0;        // flops: the share of a second component; lines: its depth over the first line's
  double second_ratio = 1;         // flops: its coupling over the first one's
  double second_detuning = 0;      // lines: where it lies from the carrier

  bool damped() const { return decay > 0 || loss > 0 || dephasing > 0; }
  double generalised() const;      // sqrt(Omega^2 + Delta^2) of a flop
};

/// Excited fraction of one member at a place on the axis (s, or rad/s from the carrier).
double population(const Apparatus& apparatus, const rehearse::Member& member, double at);

/// Excited fraction averaged over the ensemble, to 1e-6 (members.hpp).
void mean_population(const Apparatus& apparatus, std::span<const double> axis, std::vector<double>& population);

/// The commanded length of the pulse that turns by `angle_rad` best: the maximiser of the ensemble mean of
/// cos(x W (t - dead time) - angle), W the generalised frequency of a member with x = 1, x its coupling over the peak one.
double best_pulse(const Apparatus& apparatus, double angle_rad);

/// Full width at half maximum of the line, rad/s, between the outermost places of half the largest change of population.
double line_width(const Apparatus& apparatus);

}  // namespace halfturn::campaign
