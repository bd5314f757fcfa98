// SPDX-License-Identifier: Apache-2.0
#include "model/infer/second_doubt.hpp"

#include <algorithm>
#include <array>
#include <cmath>

#include "model/infer/conditioning.hpp"
#include "model/infer/estimate.hpp"
#include "model/infer/second_component.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::infer {
namespace {

// Gain at which two components are as likely as what was fitted, for one of few cycles and a ratio near 1. The places where a second
// one may lie grow with the cycles, and what it gains by chance with them: ten clean, aliased flops (campaign, seed 2) of one component
// that gained 9 to 13 and were refused for it had 19 to 61 cycles, the eight wrong answers to flops of two that gained 2 to 15 had 2.6 to 5.3.
// A ratio further from 1 than this, in its logarithm, is less usual: of 35 healthy flops that gained over 8 by chance (six
// families, seed 2) 16 lay beyond 1.6 or below 0.6.
constexpr double kEvenOdds = 8.0, kByCycles = 3.0, kUsualRatio = 0.3;

/// Length of a pulse over both components, s.
double length_of(const Physical& two, const PulseAngle& pulse) {
  return two.dead_time + best_pulse_of_two(two.generalised, two.second_share, two.second_place, pulse.angle_rad) / pulse.area_factor;
}

/// Its estimate by the delta method, the derivatives by central differences a tenth of a standard error wide.
Estimate estimate_of(const SecondFound& found, const Matrix& covariance, const PulseAngle& pulse, const Scale& scale) {
  const Vector& x = found.minimum.x;
  Vector slope = Vector::Zero(x.size());
  for (Eigen::Index i = 0; i < x.size(); ++i) {
    const double step = 0.1 * std::sqrt(covariance(i, i));
    if (!(step > 0.0)) continue;
    Vector above = x, below = x;
    above[i] += step;
    below[i] -= step;
    slope[i] = 0.5 * (length_of(found.two.unpack(above), pulse) - length_of(found.two.unpack(below), pulse)) / step;
  }
  return from_covariance(length_of(found.two.unpack(x), pulse), slope.dot(covariance * slope), scale);
}

void heed(Estimate& given, const Estimate& of_two, double weight, const Scale& scale) {
  if (!std::isfinite(given.low) || !std::isfinite(given.high) || !std::isfinite(of_two.sigma)) return;
  std::array<Part, 2> parts{Part{1.0, given}, Part{weight, of_two}};
  given = averaged(parts, scale);
}

}  // namespace

double likelihood_of_second(const SecondFound& found, const Fit& fit) {
  const Physical two = found.two.unpack(found.minimum.x);
  if (!(std::max(two.generalised, fit.physical.generalised) < fit.sampling.limit)) return 0.0;  // beyond it a second one may be anything's alias
  const double far = std::log(two.second_place) / kUsualRatio, cycles = two.generalised * fit.sampling.span / constants::kTwoPi;
  return std::exp(0.5 * (found.gain - kEvenOdds - kByCycles * std::log1p(cycles) - far * far));
}

void heed_second(const SecondFound& found, const FitOptions& options, Fit& fit) {
  const double weight = likelihood_of_second(found, fit);
  if (!(weight >= kWeightHeard)) return;
  const Matrix covariance = covariance_of(found.minimum);
  if (!covariance.allFinite()) return;
  for (std::size_t i = 0; i < options.pulses.size() && i < fit.pulse_length_s.size(); ++i) {
    const Scale scale(found.scatter, options.level);
    heed(fit.pulse_length_s[i], estimate_of(found, covariance, options.pulses[i], scale), weight, scale);
    if (i >= fit.second.pulse_length_s.size()) continue;
    const Scale other(found.scatter, options.second_level);
    heed(fit.second.pulse_length_s[i], estimate_of(found, covariance, options.pulses[i], other), weight, other);
  }
}

}  // namespace halfturn::infer
