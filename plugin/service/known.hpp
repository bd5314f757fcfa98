// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "model/infer/fit.hpp"
#include "model/recalibrate/decide.hpp"
#include "plugin/config/configuration.hpp"
#include "plugin/wire/request.hpp"

/// From a message, a configuration and a state to what the model is asked.
namespace halfturn::service {

/// A scan with the arrays that the model's view of it points into. Detunings in rad/s.
struct ModelScan {
  std::vector<double> axis;
  infer::ScanBatch batch;
};
ModelScan model_scan(const wire::Scan& scan);

/// What is known before the scan is looked at; `drive` may be null. `assumed` gets a sentence for everything taken for granted.
infer::Prior prior_for(const config::Drive* drive, const recalibrate::State& state, const wire::Scan& scan, const wire::Options& options,
                       recalibrate::Time taken_at, std::vector<std::string>& assumed);

infer::FitOptions fit_options(const config::Drive* drive, const wire::Options& options);

recalibrate::Context context_for(const config::Drive* drive, const wire::Scan& scan, const infer::Prior& prior, recalibrate::Time taken_at);

/// A Fault for what this version does not fit (`not_available`), or for what the configuration does not know
/// (`unknown_drive`), with the place in the request.
Result<void> check_scan(const wire::Request& request, const config::Configuration& configuration);

}  // namespace halfturn::service
