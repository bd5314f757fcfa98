// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/shape.hpp"

#include <cmath>

#include "model/quantity/constants.hpp"

namespace halfturn::config {
namespace {

/// Half amplitude where 0.16 c^2 - 0.5 c - 0.16 = 0, c = cos(2 pi t/T); the area is 0.42 T.
double blackman_factor() {
  const double cosine = (0.5 - std::sqrt(0.25 + 4.0 * 0.16 * 0.16)) / 0.32;
  return 0.42 / (1.0 - std::acos(cosine) / constants::kPi);
}

double gaussian_factor(double cut) {
  const double root = std::sqrt(std::log(2.0));
  return std::sqrt(constants::kPi) / (2.0 * root) * std::erf(cut * root);
}

}  // namespace

double area_factor(Shape shape, double cut) {
  switch (shape) {
    case Shape::gaussian: return gaussian_factor(cut);
    case Shape::blackman: return blackman_factor();
    case Shape::square:
    case Shape::raised_cosine: return 1.0;
  }
  return 1.0;
}

}  // namespace halfturn::config
