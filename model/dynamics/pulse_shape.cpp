// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/pulse_shape.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"

namespace halfturn::dynamics {
namespace {

/// Half amplitude lies where 0.16 c^2 - 0.5 c - 0.16 = 0, c = cos(2 pi t/T); the area is 0.42 T.
double blackman_factor() {
  const double cosine = -0.32 / (0.5 + std::sqrt(0.25 + 4.0 * 0.16 * 0.16));
  return 0.42 / (1.0 - std::acos(cosine) / constants::kPi);
}

double gaussian_factor(double cut) {
  const double root = std::sqrt(std::log(2.0));
  return std::sqrt(constants::kPi) / (2.0 * root) * std::erf(cut * root);
}

Result<double> square_factor(double edge_s, double length_s) {
  if (!(edge_s >= 0.0))
    return fault("bad_value", "edge", "found an edge of " + engineering(edge_s, "s") + ", expected at least 0 s");
  if (edge_s > length_s)
    return fault("bad_value", "edge",
                 "found an edge of " + engineering(edge_s, "s") + " in a pulse of " + engineering(length_s, "s") +
                     ", which never reaches its full amplitude; expected an edge no longer than the pulse");
  return 1.0;
}

}  // namespace

double shortest_length_s(const PulseShape& shape) { return shape.envelope == Envelope::square ? shape.edge_s : 0.0; }

Result<double> area_factor(const PulseShape& shape, double length_s) {
  if (!(length_s > 0.0) || !std::isfinite(length_s))
    return fault("bad_value", "length", "found a pulse of " + engineering(length_s, "s") + ", expected a length above 0 s");
  switch (shape.envelope) {
    case Envelope::square: return square_factor(shape.edge_s, length_s);
    case Envelope::raised_cosine: return 1.0;
    case Envelope::blackman: return blackman_factor();
    case Envelope::gaussian: break;
  }
  if (!(shape.cut > 1.0 && shape.cut <= 100.0))
    return fault("bad_value", "width",
                 "found a Gaussian cut at " + plain(shape.cut) + " times its length, expected above 1 and at most 100");
  return gaussian_factor(shape.cut);
}

}  // namespace halfturn::dynamics
