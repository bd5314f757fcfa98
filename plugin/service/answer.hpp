// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "model/infer/fit.hpp"
#include "model/recalibrate/decide.hpp"
#include "plugin/config/configuration.hpp"
#include "plugin/log/log.hpp"
#include "plugin/wire/reply.hpp"

/// From fits and decisions to replies, and to and from the log's columns.
namespace halfturn::service {

/// Everything that a `fitted` is made of.
struct Answer {
  const wire::Scan& scan;
  const wire::Options& options;
  const config::Drive* drive;
  const infer::Prior& prior;
  const infer::Fit& fit;
  const recalibrate::Decision& decision;
  std::vector<std::string> assumed;
  recalibrate::Time taken_at = 0;
};
wire::Fitted fitted_from(const Answer& answer);

/// The log's row of a decision.
log::Event event_from(const Answer& answer, const wire::Fitted& fitted);

/// What a row of the log does to a drive's state: the fold that `restore` runs.
void fold(recalibrate::State& state, const log::Event& event);

}  // namespace halfturn::service
