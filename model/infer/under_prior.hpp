// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/infer/solution.hpp"

/// The steps of one scan's inference, each from one complete fit to the next; used by fit.cpp alone.
namespace halfturn::infer {

// Deviance gained over a flat line that a fit must show for what it says of its priors to count.
inline constexpr double kEvidence = 30.0;

/// What the scan shows under one prior; false where nothing could be fitted. What Fit::quality says was set aside before stays said.
bool fit_under(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work);

/// The prior with the parameters that the fit has.
Prior felt_prior(const Fit& fit);

/// As fit_under, with what the scan contradicts of the prior set aside: Fit::prior is the prior that is left.
bool fit_with(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work);

/// Fits again with a drift of the coupling along the scan where the scan asks for one, which Fit::prior then has.
void look_for_drift(const ScanBatch& scan, const Readout& readout, const FitOptions& options, Fit& fit, FitWorkspace& work);

/// Fits a scan that scatters anew with its scatter in the likelihood: while the points spoke louder than they may, they overruled priors.
void count_scatter(const ScanBatch& scan, Readout readout, const Prior& prior, const FitOptions& options, Fit& fit, FitWorkspace& work);

/// Where the scan's deviance is improbable, fits it again with outliers allowed for, and takes that fit where it explains the points
/// better than scatter does. The share of outliers is the one that the first such fit finds.
void allow_for_outliers(const ScanBatch& scan, const Readout& readout, const Prior& prior, const FitOptions& options, Fit& fit,
                        FitWorkspace& work);

}  // namespace halfturn::infer
