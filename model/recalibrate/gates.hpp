// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/recalibrate/decide.hpp"

/// The questions that a fit must pass, each with its sentence; used by decide.cpp.
namespace halfturn::recalibrate {

/// Refusals of the fit itself, most serious first: no fit, nothing seen, poor fit, rivals, too little seen, outside `expect`.
void fit_gates(const infer::Fit& fit, const Context& context, Reasons& reasons);

/// Cautions about a fit that may be used.
void cautions(const State& state, const infer::Fit& fit, const infer::Prior& prior, const Context& context, Reasons& reasons);

/// Whether a believed fit fits what the drive's history predicts, and what follows. Effect::none comes back for a scan taken before
/// the last one believed, Effect::aside for one at another drive amplitude: both move nothing. Adds the reason `step`
/// (refuses) or one of `step_confirmed`, `first`, `late`, `other_amplitude`, `amplitude_changed` (cautions).
Effect history_gate(const State& state, const FitEvent& event, const infer::Fit& fit, const Context& context, Reasons& reasons);

bool refused(const Reasons& reasons);

/// So many proposals without an `applied` are said.
inline constexpr int kUnansweredSaid = 3;

}  // namespace halfturn::recalibrate
