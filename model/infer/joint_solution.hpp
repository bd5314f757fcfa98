// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <optional>
#include <vector>

#include "model/infer/joint_objective.hpp"
#include "model/infer/solution.hpp"

/// The steps between the scans and a JointFit; used by joint.cpp alone.
namespace halfturn::infer {

using Signs = std::array<bool, kMostJointScans>;  // negative contrast, by scan

/// The scans with what stays the same in all their joint fits.
struct JointProblem {
  std::vector<JointScan> scans = {};   // under the priors that each fitted alone left standing
  std::vector<Prior> priors = {};      // counted_once of these
  std::vector<Readout> readouts = {};  // with the scatter and the outliers that each shows alone
  std::vector<std::vector<double>> odds = {};
  std::vector<Sampling> sampling = {};
  std::vector<int> measured = {};
  std::vector<Fit> alone = {};
  const FitOptions& options;
  std::size_t reference = 0;  // the first duration scan, or scan 0
  double longest = 0.0;       // the longest span of the duration scans, s; of the pulses where there is none
  double limit = 0.0;         // the highest sampling limit of the duration scans, rad/s
  bool lines = false, flops = false;

  const JointScan& of_reference() const { return scans[reference]; }
  Problem problem(std::size_t i) const { return {scans[i].batch, readouts[i], priors[i], options, sampling[i], measured[i]}; }
};

/// A refined mode of all scans under one candidate.
struct JointSolution {
  Dynamics dynamics = Dynamics::undamped;
  Signs negative{};
  JointPhysical physical = {};
  Minimum minimum = {};        // lead: the bare coupling
  double apparent = kUnknown;  // rad/s, of the reference scan; without duration scans the coupling
  double aicc = kUnknown;
};

struct JointMode {
  std::vector<JointSolution> solutions;  // best first
  const JointSolution& best() const { return solutions.front(); }
};

/// A place to begin: what is shared, and how well scans of any signals agree with it.
struct JointStart {
  JointPhysical physical;  // undamped, or dephased as much as `damping` says
  Signs negative{};
  double deviance = 0.0;  // nearly
  bool damped = false;
};

/// The best starts of all scans, each held against all: their signals are solved for. At most `most`, no two of one mode.
std::vector<JointStart> joint_starts(const JointProblem& problem, std::size_t most, FitWorkspace& workspace);

/// Refined modes under all candidates that there is room for; best first by AICc.
std::vector<JointMode> refine_joint(const JointProblem& problem, std::span<const JointStart> starts, FitWorkspace& workspace);

/// Whether two answers are one mode: signs of the contrast alike, frequencies within a third of a resolution element of the longest
/// scan, lines within a fifth of one over the longest pulse.
bool same_joint_mode(const JointProblem& problem, const JointSolution& a, const JointSolution& b);
bool same_line(const JointProblem& problem, double offset_a, double offset_b);

/// The joint objective of a solution, with the lead asked for.
JointObjective objective_of(const JointProblem& problem, const JointSolution& solution, Lead lead, FitWorkspace& workspace);

/// Chooses among modes as choose_mode does among those of one scan; fills `outside_expect`, `by_history` and, of the flops' and the line's
/// terms each, the rival left.
struct JointChoice {
  std::size_t chosen = 0;
  bool outside_expect = false, by_history = false;
  std::optional<RivalMode> rival, line_rival;
};
JointChoice choose_joint(const JointProblem& problem, std::span<const JointMode> modes, double scatter, double line_width, FitWorkspace& workspace);

/// Covariance of scan i's own coordinates (lead: the generalised frequency) in the joint fit.
Matrix covariance_of_part(const ScanObjective& own, const JointObjective& joint, std::size_t i, const JointSolution& solution);

/// The part of the joint minimum that is scan i's own, in its coordinates: its information is what of the joint one is left for it, the
/// other scans' parameters following.
Minimum part_minimum(const ScanObjective& own, const JointObjective& joint, std::size_t i, const JointSolution& solution);

/// Fills the parts and what scans say of one another: FitQuality of each at the joint solution, and the strain.
std::vector<FitQuality> judge_parts(const JointProblem& problem, const JointSolution& solution, JointFit& fit, FitWorkspace& workspace);

/// Fills the estimates of `fit.fit` and `fit.line`, with errors widened by `scatter` beyond what the readouts hold already.
void estimate_joint(const JointProblem& problem, const JointMode& mode, double scatter, JointFit& fit, FitWorkspace& workspace);

}  // namespace halfturn::infer
