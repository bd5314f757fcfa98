// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <vector>

#include "model/infer/frequency_search.hpp"
#include "model/infer/scan_objective.hpp"

/// Global starting points: for each trial frequency and damping (or line offset and pulse area) the linear part is solved
/// exactly on the actual axis, and every distinct good mode is handed on.
namespace halfturn::infer {

/// A starting point. `gain` is the weighted sum of squares that it takes off a flat line (a deviance, nearly).
struct Mode {
  Physical start;
  bool damped = false;
  double gain = 0.0;
};

/// What the sampling of a duration scan can tell apart. `limit` is half the sampling rate of an even grid (or of the even grid
/// of which a gapped one is part); of an uneven grid half of one over its smallest gap, at most 8 times that of an even grid
/// of as many points over the same span. Angular, rad/s (scans of amplitudes: rad per amplitude).
struct Sampling {
  double span = 0.0;       // in the axis's unit, between the extremes of the axis
  double spacing = 0.0;    // smallest gap
  double limit = 0.0;      // duration and amplitude scans
  bool even = false;       // all gaps are multiples of the smallest, to 1e-3 of it
  int distinct = 0;        // different values on the axis
};
Sampling sampling_of(Axis kind, std::span<const double> axis);

/// ScanBatch::progress of a scan, in memory of the caller's: by when points were taken, or by their order. Empty for lines, and where
/// all were taken at once.
std::span<const double> progress_of(const ScanBatch& scan, std::vector<double>& progress);

struct SearchWorkspace {
  void reserve(std::size_t points);
  std::vector<double> value, weight;
  FrequencySearch frequencies;
  std::vector<Mode> found;
  std::vector<double> table, table_axis;
  std::vector<int> place;               // of a point among the table's steps
  std::vector<double> part, weighted;   // the rest of its place; its weight times its value
  dynamics::Workspace dynamics;
};

/// Starting points of a duration scan, best first, of at most `modes.size()`; returns how many. Frequencies from a tenth of a
/// cycle in the span to the sampling limit or, where the prior expects more, to 1.25 times the upper end of that. Each sign of
/// the contrast that priors admit is a mode of its own. 0 for a scan of fewer than 4 distinct lengths or without shots.
std::size_t duration_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                            std::span<Mode> modes, SearchWorkspace& workspace);

/// Starting points of a detuning scan: offsets across the window and two widths beyond it, areas from 0.3 to 4.5 pi (damped: to
/// 13 pi) or around the one that history knows, undamped and dephased at two rates; floor and contrast solved for with what is known of them.
std::size_t line_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                        std::span<Mode> modes, SearchWorkspace& workspace);

/// Starting points of a scan of amplitudes: rotations per amplitude from a tenth of a cycle in the span to the sampling limit, from
/// a gain that rises by a third to a saturation that loses over half of the coupling.
std::size_t amplitude_starts(const ScanBatch& scan, const Readout& readout, const Prior& prior, const Sampling& sampling,
                             std::span<Mode> modes, SearchWorkspace& workspace);

/// Moves signals that a linear solve put where no signal can be: probabilities between 0.005 and 0.995 and apart, rates above 0.
void keep_signals_possible(Readout::Kind kind, Physical& start);

/// Whether the contrast's prior admits this sign, to 6 sigma.
bool sign_admitted(const Prior& prior, double contrast);

/// Modes are kept down to this below the best: the linear solve is not the likelihood.
double kept_above(double best_gain);

/// Weighted sums over points for y ~ intercept + slope x by least squares.
struct StraightLine {
  double w = 0.0, y = 0.0, x = 0.0, xx = 0.0, xy = 0.0;

  void add(double weight, double value, double at) {
    const double weighted = weight * at;
    w += weight;
    y += weight * value;
    x += weighted;
    xx += weighted * at;
    xy += weighted * value;
  }
  bool solvable() const { return w * xx - x * x > 1e-12 * w * xx; }
  double slope() const { return (w * xy - x * y) / (w * xx - x * x); }
  double intercept() const { return (y - slope() * x) / w; }
  /// The weighted sum of squares taken off a flat line; 0 where there is no slope to solve for.
  double gain() const { return solvable() ? slope() * (xy - x * y / w) : 0.0; }
};

/// Fills the workspace's `value` and `weight` by linear_points; false where a scan has too few places or no shots to begin from.
bool take_points(const Readout& readout, const Sampling& sampling, SearchWorkspace& workspace);

/// The scan's points as value and weight for a linear solve: fraction and n/(p(1-p)) with p = (k+2)/(n+4) (binomial), signal
/// and 1/sigma^2 (Gaussian), rate and N^2/(k+1) (Poisson); weight 0 where nothing was measured.
void linear_points(const Readout& readout, std::span<double> value, std::span<double> weight);

}  // namespace halfturn::infer
