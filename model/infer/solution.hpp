// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <optional>
#include <vector>

#include "model/infer/fit.hpp"

/// The steps between starting points and a Fit; used by fit.cpp alone.
namespace halfturn::infer {

/// One scan with what stays the same in all its fits.
struct Problem {
  const ScanBatch& scan;
  Readout readout;
  const Prior& prior;
  const FitOptions& options;
  Sampling sampling;
  int measured = 0;
};

/// A refined mode under one candidate.
struct Solution {
  Dynamics dynamics = Dynamics::undamped;
  bool negative_contrast = false;
  Physical physical;
  Minimum minimum;
  double apparent = kUnknown;  // rad/s, ScanObjective::apparent_frequency
  double aicc = kUnknown;
  int parameters = 0;
};

/// All candidates of one mode, the best first.
struct ModeSolutions {
  std::vector<Solution> solutions;
  const Solution& best() const { return solutions.front(); }
};

/// How many points were measured.
int measured_points(const Readout& readout);

/// Refines every start; modes that fall together are one; those within the rival margin (and 20 more) of the best are refined
/// under every candidate. Best first by AICc.
std::vector<ModeSolutions> refine_modes(const Problem& problem, std::span<const Mode> starts, FitWorkspace& workspace);

/// The rate, 1/s, at which a simple candidate's oscillation fades on resonance; 0 of the others.
double envelope_of(const Solution& solution);

/// Where to begin a candidate from a start of the search, whose damping is that of the oscillation.
Physical first_start(const Problem& problem, Dynamics candidate, const Mode& start, FitWorkspace& workspace);

/// Where to begin a candidate from another one's solution: with the same apparent frequency, and `factor` times about the same
/// damping of the envelope.
Physical start_for(const Problem& problem, Dynamics candidate, const Solution& from, double factor, FitWorkspace& workspace);

/// Where two solutions count as one mode: equal sign of contrast and an apparent frequency within a third of a resolution element; of a
/// line, a centre within a fifth of one over the pulse length.
bool same_mode(const Problem& problem, const Solution& a, const Solution& b);

/// Deviance, scatter, evidence over a flat line and a monotone curve, range: what needs no rival and no interval.
FitQuality judge(const Problem& problem, const Solution& solution, FitWorkspace& workspace);

/// Chooses among modes: by `expect` where the data prefer none, then by history where the data cannot tell; says the rival left.
/// `quality.scatter` divides deviances.
std::size_t choose_mode(const Problem& problem, std::span<const ModeSolutions> modes, FitQuality& quality, FitWorkspace& workspace);

/// The frequencies that the start search of a duration scan goes through.
TrialGrid trial_grid(const Prior& prior, const Sampling& sampling, std::size_t points);

/// Fills the estimates, averaged over candidates with their Akaike weights, and the pulse lengths.
void estimate(const Problem& problem, const ModeSolutions& mode, Fit& fit, FitWorkspace& workspace);

/// Fills Fit::second where a second level is asked for; after `estimate`, with the same scatter.
void estimate_second(const Problem& problem, std::span<const ModeSolutions> modes, std::size_t chosen, Fit& fit, FitWorkspace& workspace);

/// Full width at half maximum of the line of these rates after a pulse of this length, rad/s: between the outermost places
/// where the population change is half of its largest.
double line_width(const dynamics::Rates& rates, const dynamics::Ensemble& ensemble, const dynamics::Start& start, double length_s,
                  dynamics::EnsembleWorkspace& workspace);

}  // namespace halfturn::infer
