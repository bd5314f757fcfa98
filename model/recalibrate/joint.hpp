// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>

#include "model/infer/joint.hpp"
#include "model/recalibrate/decide.hpp"

/// From a joint fit and the drive's history to one verdict.
namespace halfturn::recalibrate {

struct JointDecision {
  /// Verdict, reasons, pulses and carrier shift of the whole; `event` is that of the duration scans where there are any. Where the
  /// carrier is to be moved the verdict is `apply`, whatever the pulses' own.
  Decision whole;
  std::optional<FitEvent> line;  // where scans of both kinds are among them, what the line's track is advanced by
};

/// Decides on a joint fit: the flops' half by the gates and the history of a flop, the line's half by those of a line. What refuses one
/// half refuses the other: they share every value. `prior` is what the reference scan was fitted under before the fit; the context is
/// that of the whole, its carrier the one that the answer refers to.
JointDecision decide_joint(const State& state, const infer::JointFit& fit, const infer::Prior& prior, const Context& context);

}  // namespace halfturn::recalibrate
