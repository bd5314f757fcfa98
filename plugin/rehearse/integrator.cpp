// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/integrator.hpp"

#include <Eigen/Dense>
#include <unsupported/Eigen/MatrixFunctions>

#include <algorithm>
#include <array>
#include <cmath>
#include <complex>

namespace halfturn::rehearse {
namespace {

using Complex = std::complex<double>;
using Density = Eigen::Matrix2cd;  // rows and columns g, e

double coherence_decay(const Rates& rates) { return (rates.decay + rates.loss) / 2 + rates.dephasing; }

/// Generator of (Re rho_ge, Im rho_ge, rho_ee, rho_gg), from -i[H, rho] with H = -Delta |e><e| + Omega/2 (|e><g| + |g><e|).
Eigen::Matrix4d liouvillian(const Rates& rates) {
  const double gamma = coherence_decay(rates);
  const double half = rates.rabi / 2;
  Eigen::Matrix4d generator;
  generator << -gamma, rates.detuning, 0, 0,
      -rates.detuning, -gamma, -half, half,
      0, rates.rabi, -(rates.decay + rates.loss), 0,
      0, -rates.rabi, rates.decay, 0;
  return generator;
}

/// d rho/dt at the coupling `rabi`: commutator, jumps of decay and loss, dephasing.
Density slope(const Rates& rates, double rabi, const Density& rho) {
  Density hamiltonian = Density::Zero();
  hamiltonian(1, 1) = -rates.detuning;
  hamiltonian(0, 1) = hamiltonian(1, 0) = rabi / 2;
  Density result = Complex(0, -1) * (hamiltonian * rho - rho * hamiltonian);
  const double gamma = coherence_decay(rates);
  result(0, 0) += rates.decay * rho(1, 1);
  result(1, 1) -= (rates.decay + rates.loss) * rho(1, 1);
  result(0, 1) -= gamma * rho(0, 1);
  result(1, 0) -= gamma * rho(1, 0);
  return result;
}

// Dormand and Prince 1980, table 2: the pair 5(4) with seven stages.
constexpr int kStages = 7;
constexpr std::array<double, kStages> kNodes = {0, 1.0 / 5, 3.0 / 10, 4.0 / 5, 8.0 / 9, 1, 1};
constexpr double kWeights[kStages][kStages - 1] = {
    {},
    {1.0 / 5},
    {3.0 / 40, 9.0 / 40},
    {44.0 / 45, -56.0 / 15, 32.0 / 9},
    {19372.0 / 6561, -25360.0 / 2187, 64448.0 / 6561, -212.0 / 729},
    {9017.0 / 3168, -355.0 / 33, 46732.0 / 5247, 49.0 / 176, -5103.0 / 18656},
    {35.0 / 384, 0, 500.0 / 1113, 125.0 / 192, -2187.0 / 6784, 11.0 / 84}};
constexpr std::array<double, kStages> kErrorWeights = {71.0 / 57600,      0,           -71.0 / 16695, 71.0 / 1920,
                                                       -17253.0 / 339200, 22.0 / 525, -1.0 / 40};

struct Step {
  Density end;
  double error;
};

Step dormand_prince(const Rates& rates, const Envelope& envelope, const Density& start, double time, double width) {
  std::array<Density, kStages> stages;
  Density point = start;
  for (int stage = 0; stage < kStages; ++stage) {
    point = start;
    for (int earlier = 0; earlier < stage; ++earlier) point += width * kWeights[stage][earlier] * stages[earlier];
    stages[stage] = slope(rates, rates.rabi * envelope(time + kNodes[stage] * width), point);
  }
  Density error = Density::Zero();
  for (int stage = 0; stage < kStages; ++stage) error += width * kErrorWeights[stage] * stages[stage];
  return {point, error.cwiseAbs().maxCoeff()};  // the last stage stands at the end of the step
}

double first_step(const Rates& rates, double duration_s) {
  const double fastest = std::abs(rates.rabi) + std::abs(rates.detuning) + rates.decay + rates.loss + rates.dephasing;
  return fastest > 0 ? std::min(duration_s, 0.05 / fastest) : duration_s;
}

}  // namespace

Populations after_square_pulse(const Rates& rates, double duration_s, double start_excited) {
  const Eigen::Matrix4d propagator = (liouvillian(rates) * std::max(duration_s, 0.0)).exp();
  const Eigen::Vector4d end = propagator * Eigen::Vector4d(0, 0, start_excited, 1 - start_excited);
  return {end(2), end(3)};
}

void after_square_pulses(const Rates& rates, double first_s, double step_s, std::span<double> excited) {
  const Eigen::Matrix4d generator = liouvillian(rates);
  const Eigen::Matrix4d step = (generator * step_s).exp();
  Eigen::Vector4d state = (generator * std::max(first_s, 0.0)).exp() * Eigen::Vector4d(0, 0, 0, 1);
  for (double& fraction : excited) {
    fraction = state(2);
    state = step * state;
  }
}

Populations after_shaped_pulse(const Rates& rates, const Envelope& envelope, double duration_s, double start_excited,
                               double tolerance) {
  Density rho = Density::Zero();
  rho(0, 0) = 1 - start_excited;
  rho(1, 1) = start_excited;
  const double smallest = 1e-9 * duration_s;  // a kink that no step resolves is passed in steps too short to matter
  double time = 0;
  double width = first_step(rates, duration_s);
  while (time < duration_s) {
    width = std::min(width, duration_s - time);
    const Step step = dormand_prince(rates, envelope, rho, time, width);
    if (step.error <= tolerance || width <= smallest) {
      rho = step.end;
      time = width >= duration_s - time ? duration_s : time + width;
    }
    const double change = 0.9 * std::pow(tolerance / std::max(step.error, 1e-300), 0.2);
    width = std::max(width * std::clamp(change, 0.2, 5.0), smallest);
  }
  return {rho(1, 1).real(), rho(0, 0).real()};
}

double undamped_population(double rabi, double detuning, double duration_s) {
  const double generalised = std::hypot(rabi, detuning);
  if (generalised == 0 || duration_s <= 0) return 0;
  const double amplitude = rabi / generalised * std::sin(generalised * duration_s / 2);
  return amplitude * amplitude;
}

}  // namespace halfturn::rehearse
