// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <vector>

#include "model/infer/fit.hpp"

/// Several scans of one drive under one likelihood.
namespace halfturn::infer {

/// The most scans of a joint fit: with two signals a scan, the Rabi frequency, the line, the dead time and one damping, four have
/// kMaxParameters = 12 free parameters. Candidates with two rates are compared where there is room for both.
inline constexpr std::size_t kMostJointScans = 4;

/// One of the scans. All are of one drive at one drive amplitude: they share the Rabi frequency, the line's place, the dead time and
/// the dynamics with their damping; floor and contrast are each scan's own, and so are what `prior` knows of these, the prepared state
/// and the references.
struct JointScan {
  ScanBatch batch;
  Prior prior;
  double carrier = 0.0;  // rad/s, the carrier it was taken at less the one that the answer refers to
};

/// What one scan says of the joint fit.
struct JointPart {
  double deviance = kUnknown, dof = kUnknown, p_value = kUnknown, scatter = 1.0;  // at the joint fit, as FitQuality
  int points = 0;
  std::vector<int> distrusted;
  double strain = kUnknown;  // deviance that this scan alone would gain by leaving the shared values, in units of its scatter
};

struct JointFit {
  /// In the terms of the duration scans where there are any, else of the detuning scans. `physical`, `x`, `covariance`, `prior`, floor
  /// and contrast are those of scan `reference`. Beside detuning scans the pulse lengths and `generalised` are those of a carrier
  /// that sits on the line, else of the carrier referred to. FitQuality: deviance and dof summed; p_value of the whole (Fisher) or
  /// the worst scan's times their number, whichever is less; scatter, residuals and outliers of the worst scan.
  Fit fit;
  /// Where scans of both kinds are among them, the same fit in the terms of the detuning scans.
  std::optional<Fit> line;
  std::size_t reference = 0;
  std::vector<JointPart> parts;  // one a scan; empty where nothing was fitted
};

/// Fits 2 to kMostJointScans scans together, each with readings of one site. Each is fitted alone first, which tells its scatter, its
/// outliers and what it contradicts of its prior; starts of all are then held against all scans, and the best refined together under
/// every candidate. What is known of shared quantities counts once; of the Rabi frequency history counts only where all are
/// detuning scans, and of the line the prior only where none is (a fit of detuning scans alone does not read it). No drift along
/// a scan is allowed for. Where one scan cannot be fitted alone, the outcome and quality are that scan's, and it is `reference`.
void fit_joint(std::span<const JointScan> scans, const FitOptions& options, JointFit& fit, FitWorkspace& workspace);

/// How many free parameters a joint fit of these scans has under a candidate.
int joint_parameters(std::span<const JointScan> scans, Dynamics candidate);

}  // namespace halfturn::infer
