// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <span>
#include <vector>

#include "model/infer/joint.hpp"
#include "model/infer/scan_objective.hpp"

/// The negative log likelihood of several scans that share parameters, as a sum of ScanObjectives.
namespace halfturn::infer {

/// What the scans depend on together.
struct JointPhysical {
  double rabi = 0.0;             // bare, peak coupling, rad/s
  double offset = 0.0;           // of the line from the carrier referred to, rad/s
  double detuning_square = 0.0;  // of duration scans on one carrier without detuning scans, whose sign of Delta nothing tells
  double dead_time = 0.0;        // s
  double damping = 0.0, dephasing = 0.0, breadth = 0.0;      // as in Physical
  std::array<double, kMostJointScans> ground{}, excited{};   // each scan's signals
};

/// Positions of the free parameters; -1 where one is held. Scan i has its signals at `signals + 2 i` (ground) and the next.
struct JointLayout {
  int lead = 0, offset = -1, detuning_square = -1, dead_time = -1, damping = -1, dephasing = -1, breadth = -1, signals = 1;
  int count = 1;
};

/// Priors under which the sum of the scans' likelihoods counts what they share once: the first scan of those that know of it keeps it,
/// the others hold it so loosely that it says nothing.
std::vector<Prior> counted_once(std::span<const JointScan> scans);

class JointObjective final : public Objective {
 public:
  /// `scans`, `readouts`, `priors` (of counted_once; one a scan each) and `workspace` must outlive the objective; the workspace is
  /// reserved for the longest scan. Which quantity the coordinate `lead` is: the bare coupling, or what Lead says of the
  /// generalised frequency on the carrier referred to (on the line where detuning scans are among them).
  JointObjective(std::span<const JointScan> scans, std::span<const Readout> readouts, std::span<const Prior> priors, Dynamics candidate, Lead lead,
                 const std::array<bool, kMostJointScans>& negative_contrast, ObjectiveWorkspace& workspace);

  bool evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const override;

  const JointLayout& layout() const { return layout_; }
  Bounds bounds() const;
  Vector pack(const JointPhysical& physical) const;
  /// The coupling is NaN where the lead stands for none.
  JointPhysical unpack(const Vector& x) const;
  /// What scan `i` depends on.
  Physical of_scan(std::size_t i, const JointPhysical& physical) const;
  const ScanObjective& scan(std::size_t i) const { return parts_[i]; }
  std::size_t scans() const { return parts_.size(); }
  /// Derivatives of scan i's own coordinates (its ScanObjective's, the lead being the bare coupling) by the joint ones.
  Matrix jacobian(std::size_t i, const JointPhysical& physical) const;

 private:
  struct Slopes {
    double by_lead = 1.0, by_square = 0.0, by_dead_time = 0.0, by_breadth = 0.0;  // of the coupling
  };
  double factor(const JointPhysical& physical, double* by_breadth) const;
  double reference_square(const JointPhysical& physical) const;
  double lead_of(const JointPhysical& physical) const;
  double rabi_of(double lead, const JointPhysical& physical) const;
  Slopes slopes(const JointPhysical& physical) const;
  void lay_out();
  void add_line_prior(const JointPhysical& physical, double& value, Vector* gradient, Matrix* information) const;

  std::span<const JointScan> given_;
  std::span<const Prior> priors_;
  Dynamics candidate_;
  Lead lead_;
  bool lines_ = false;              // detuning scans are among them
  std::optional<Known> of_line_;    // a prior of `offset` that no scan carries
  JointLayout layout_;
  std::vector<ScanObjective> parts_;
  ObjectiveWorkspace& work_;
};

}  // namespace halfturn::infer
