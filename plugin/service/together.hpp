// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "model/recalibrate/joint.hpp"
#include "plugin/service/answer.hpp"
#include "plugin/service/known.hpp"

/// Joint fits: several scans of one drive, one answer.
namespace halfturn::service {

/// A Fault (`bad_shape`, `bad_value`, `missing_field`) where scans cannot share their values: too many, other drive amplitudes, a carrier
/// that only some state.
Result<void> check_together(const std::vector<wire::Scan>& scans, const config::Drive* drive, const wire::Options& options);

/// When the latest of the scans was taken; those that do not say count as taken when they came. The answer refers to its carrier.
recalibrate::Time latest_taken(const std::vector<wire::Scan>& scans, recalibrate::Time received_at);

struct Together {
  infer::JointFit fit;
  infer::Prior prior;  // of the reference scan, before the fit
  std::vector<std::string> assumed;
};
Together fit_together(const std::vector<wire::Scan>& scans, const config::Drive* drive, const recalibrate::State& state,
                      const wire::Options& options, recalibrate::Time received_at, infer::FitWorkspace& workspace);

recalibrate::JointDecision decide_together(const recalibrate::State& state, const infer::JointFit& fit, const infer::Prior& prior,
                                           const std::vector<wire::Scan>& scans, const config::Drive* drive, recalibrate::Time received_at);

/// One scan that stands for all in an Answer: the reference scan with the joined names, the carrier that the answer refers to and all that
/// was measured beside any of them.
wire::Scan standing_for(const std::vector<wire::Scan>& scans, std::size_t reference, recalibrate::Time received_at);

/// What each scan said, into the reply.
void add_scans(const std::vector<wire::Scan>& scans, const infer::JointFit& fit, wire::Fitted& fitted);

/// The log's second row of a joint fit with both kinds of scans: what moves the line's track. Without bulk.
log::Event line_event_from(const Answer& answer, const infer::Fit& line, const recalibrate::FitEvent& event, const wire::Fitted& fitted);

}  // namespace halfturn::service
