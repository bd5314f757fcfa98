// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <random>
#include <vector>

#include "model/infer/fit.hpp"
#include "model/quantity/constants.hpp"

/// Simulated scans for the tests of the inference. The truth is Rabi's formula (I. I. Rabi, Phys. Rev. 51, 652 (1937)), and
/// Torrey's closed solution on resonance with decay, written out here: nothing is taken from model/dynamics.
namespace halfturn::tests {

struct Truth {
  double rabi = 0.0;        // rad/s
  double detuning = 0.0;    // rad/s
  double dead_time = 0.0;   // s
  double floor = 0.05, contrast = 0.9;
  double decay = 0.0;       // 1/s, on resonance only

  double signal(double length) const {
    const double t = std::max(0.0, length - dead_time);
    double population = 0.0;
    if (decay > 0.0) {
      const double l = std::sqrt(rabi * rabi - decay * decay / 16.0), e = std::exp(-0.75 * decay * t);
      population = rabi * rabi / (2.0 * rabi * rabi + decay * decay) * (1.0 - e * (std::cos(l * t) + 0.75 * decay / l * std::sin(l * t)));
    } else {
      const double g = std::hypot(rabi, detuning), s = std::sin(0.5 * g * t);
      population = rabi * rabi / (g * g) * s * s;
    }
    return floor + contrast * population;
  }
};

struct Sample {
  std::vector<double> axis, observed, weight;
  infer::ScanBatch batch;

  Sample() = default;
  Sample(const Sample&) = delete;
  void view(infer::Axis kind = infer::Axis::duration) {
    batch.kind = kind;
    batch.axis = axis;
    batch.observed = observed;
    batch.weight = weight;
  }
};

inline void take_flop(Sample& sample, const Truth& truth, std::vector<double> lengths, int shots, std::mt19937_64& random) {
  sample.axis = std::move(lengths);
  sample.observed.clear();
  for (const double t : sample.axis) sample.observed.push_back(std::binomial_distribution<int>(shots, truth.signal(t))(random));
  sample.weight.assign(sample.axis.size(), shots);
  sample.view();
}

inline void take_line(Sample& sample, Truth truth, double offset, double pulse_s, std::vector<double> detunings, int shots, std::mt19937_64& random) {
  sample.axis = std::move(detunings);
  sample.observed.clear();
  for (const double d : sample.axis) {
    truth.detuning = d - offset;
    sample.observed.push_back(std::binomial_distribution<int>(shots, truth.signal(pulse_s))(random));
  }
  sample.weight.assign(sample.axis.size(), shots);
  sample.view(infer::Axis::detuning);
  sample.batch.pulse_length_s = pulse_s;
}

inline std::vector<double> even(double first, double last, int points) {
  std::vector<double> axis;
  for (int i = 0; i < points; ++i) axis.push_back(first + (last - first) * i / (points - 1));
  return axis;
}

inline infer::Fit fit_one(const Sample& sample, const infer::Prior& prior, const infer::FitOptions& options = {}) {
  static infer::FitWorkspace workspace;
  infer::Fit fit;
  infer::fit(sample.batch, {&prior, 1}, options, {&fit, 1}, workspace);
  return fit;
}

}  // namespace halfturn::tests
