// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "model/quantity/result.hpp"

namespace halfturn::dynamics {

enum class Envelope { square, gaussian, blackman, raised_cosine };
enum class Edge { linear, raised_cosine };

/// How a pulse is played. The commanded length is its full width at half amplitude.
struct PulseShape {
  Envelope envelope = Envelope::square;
  Edge edge = Edge::linear;  // of a square pulse
  double edge_s = 0.0;       // of a square pulse: duration of each edge from 0 to full amplitude, s, at least 0
  double cut = 3.0;          // of a Gaussian: the whole pulse in units of its length; above 1, at most 100
};

/// The shortest length at which a square pulse still reaches its full amplitude: one edge. 0 for all other shapes.
double shortest_length_s(const PulseShape& shape);

/// Pulse area over (peak amplitude * length), for a commanded length in s. Relative error < 1e-14.
/// - square: 1, for symmetric edges of either form, which lose inside as much as they add outside the half-amplitude points;
/// - raised cosine, sin^2(pi t/T): 1;
/// - Blackman's window, 0.42 - 0.5 cos(2 pi t/T) + 0.08 cos(4 pi t/T) (R. B. Blackman and J. W. Tukey, The Measurement of
///   Power Spectra (1958), section B.5): 1.035812872...;
/// - Gaussian, exp(-4 ln 2 t^2/length^2) for |t| <= cut*length/2 and 0 outside: sqrt(pi/(4 ln 2)) erf(cut sqrt(ln 2)).
/// Faults (`bad_value`): a length that is not positive and finite (`length`); an edge that is negative or longer than the
/// length (`edge`); a cut outside 1 to 100 (`width`).
Result<double> area_factor(const PulseShape& shape, double length_s);

}  // namespace halfturn::dynamics
