// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <span>
#include <vector>

/// The exact solution of a duration scan's linear part at each trial frequency and damping, on the actual times.
namespace halfturn::infer {

/// The points of a scan for a linear solve (linear_points), and where the envelope is 1.
struct LinearPoints {
  std::span<const double> time, value, weight;
  double origin = 0.0;
};

/// Trial frequencies bottom + k*step, k = 0 ... count-1, rad/s.
struct TrialGrid {
  double bottom = 0.0, step = 0.0;
  int count = 0;
  double at(int k) const { return bottom + step * k; }
};

/// value ~ c[0] + e(t) (c[1] cos W t + c[2] sin W t + c[3]), e = exp(-damping (t - origin)); c[3] only with damping.
struct LinearFit {
  double gain = -1.0;  // weighted sum of squares taken off a constant; below 0 where the terms are collinear
  std::array<double, 4> coefficients{};
};

/// The fit at one frequency and damping.
LinearFit solve_linear(const LinearPoints& points, double frequency, double damping);

/// Arrays that the search needs; nothing allocates once they have grown.
struct FrequencySearch {
  std::vector<double> cosine, sine, turn_cosine, turn_sine;     // [point][lane]
  std::vector<double> envelope, weighted, squared, with_value;  // [damping][point]
  std::vector<double> gain;                                     // [damping][frequency]
};

/// The gain at each frequency of the grid for each damping, into search.gain. Every point's phasor turns by its own step from
/// trial to trial, four trials side by side; the phase error grows to 1e-16 a trial. The gains are those of solve_linear to
/// 1e-9 of the largest. Where `wanted` (one a trial, or none) is 0 for four trials side by side, they are left out: a gain of -1.
void search_frequencies(const LinearPoints& points, const TrialGrid& grid, std::span<const double> dampings, FrequencySearch& search,
                        std::span<const char> wanted = {});

}  // namespace halfturn::infer
