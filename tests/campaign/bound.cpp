// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/bound.hpp"

#include <Eigen/Dense>

#include <algorithm>
#include <cmath>
#include <functional>

#include "model/quantity/constants.hpp"

namespace halfturn::campaign {
namespace {

using Eigen::MatrixXd;
using Eigen::VectorXd;

/// A parameter of the true model that the data have to tell.
struct Parameter {
  std::function<double&(Apparatus&)> of;
  double step;
  double prior_sigma = 0;  // 0: none
};

template <class M>
Parameter member(M member_of, double step, double prior_sigma = 0) {
  return {[member_of](Apparatus& a) -> double& { return a.*member_of; }, step, prior_sigma};
}

template <class M>
Parameter of_ensemble(M member_of, double value) {
  return {[member_of](Apparatus& a) -> double& { return a.ensemble.*member_of; }, 1e-3 * value};
}

/// Ground and excited signal come last.
std::vector<Parameter> parameters_of(const Case& c) {
  const auto& t = c.truth;
  const double period = constants::kTwoPi / t.rabi;
  std::vector<Parameter> all = {member(&Apparatus::rabi, 1e-5 * t.rabi)};
  if (t.line) all.push_back(member(&Apparatus::detuning, 1e-5 / t.pulse_s));
  else if (c.drive.carrier_uncertainty) all.push_back(member(&Apparatus::detuning, 1e-5 * t.rabi, *c.drive.carrier_uncertainty));
  const double stated = c.drive.dead_time ? c.drive.dead_time->sigma : 100e-9;
  all.push_back(member(&Apparatus::dead_time, 1e-5 * period, c.misstated ? std::abs(t.dead_time) : stated));
  for (const auto rate : {&Apparatus::decay, &Apparatus::loss, &Apparatus::dephasing})
    if (t.*rate > 0) all.push_back(member(rate, 1e-3 * t.*rate));
  const auto& e = t.ensemble;
  if (e.rabi_spread > 0) all.push_back(of_ensemble(&Ensemble::rabi_spread, e.rabi_spread));
  if (e.detuning_spread_hz > 0) all.push_back(of_ensemble(&Ensemble::detuning_spread_hz, e.detuning_spread_hz));
  if (e.cloud_ratio > 0) all.push_back(of_ensemble(&Ensemble::cloud_ratio, e.cloud_ratio));
  if (e.mean_phonons > 0) all.push_back(of_ensemble(&Ensemble::mean_phonons, e.mean_phonons));
  if (t.second_weight > 0) {
    all.push_back(member(&Apparatus::second_weight, 1e-4));
    all.push_back(t.line ? member(&Apparatus::second_detuning, 1e-5 / t.pulse_s) : member(&Apparatus::second_ratio, 1e-5));
  }
  all.push_back(member(&Apparatus::ground, 0));
  all.push_back(member(&Apparatus::excited, 0));
  return all;
}

/// d population / d parameter at every point; the last two columns are the signal's by ground and excited signal.
MatrixXd signal_derivatives(const Case& c, std::span<const double> axis, const std::vector<Parameter>& parameters) {
  const auto points = static_cast<Eigen::Index>(axis.size()), count = static_cast<Eigen::Index>(parameters.size());
  MatrixXd by(points, count);
  std::vector<double> above, below;
  const double contrast = c.truth.excited - c.truth.ground;
  for (Eigen::Index k = 0; k + 2 < count; ++k) {
    const auto& parameter = parameters[static_cast<std::size_t>(k)];
    Apparatus moved = c.truth;
    parameter.of(moved) += parameter.step;
    mean_population(moved, axis, above);
    parameter.of(moved) -= 2 * parameter.step;
    mean_population(moved, axis, below);
    for (Eigen::Index i = 0; i < points; ++i)
      by(i, k) = contrast * (above[static_cast<std::size_t>(i)] - below[static_cast<std::size_t>(i)]) / (2 * parameter.step);
  }
  for (Eigen::Index i = 0; i < points; ++i) {
    const double p = (c.expected[static_cast<std::size_t>(i)] - c.truth.ground) / contrast;
    by(i, count - 2) = 1 - p;
    by(i, count - 1) = p;
  }
  return by;
}

double binomial_variance(double p, double shots) {
  const double inside = std::clamp(p, 0.5 / shots, 1 - 0.5 / shots);
  return inside * (1 - inside) / shots;
}

void add_known(const Case& c, const std::vector<Parameter>& parameters, MatrixXd& information) {
  const auto count = information.rows(), ground = count - 2, excited = count - 1;
  for (Eigen::Index k = 0; k < count; ++k) {
    const double sigma = parameters[static_cast<std::size_t>(k)].prior_sigma;
    if (sigma > 0) information(k, k) += 1 / (sigma * sigma);
  }
  if (c.drive.floor) information(ground, ground) += 1 / std::pow(c.drive.floor->sigma, 2);
  if (c.drive.contrast) {
    VectorXd by = VectorXd::Zero(count);
    by[excited] = 1;
    by[ground] = -1;
    information += by * by.transpose() / std::pow(c.drive.contrast->sigma, 2);
  }
  if (c.scan.references) {
    const auto& r = *c.scan.references;
    const bool negative = c.truth.excited < c.truth.ground;
    information(ground, ground) += 1 / binomial_variance(c.truth.ground, negative ? r.bright_of : r.dark_of);
    information(excited, excited) += 1 / binomial_variance(c.truth.excited, negative ? r.dark_of : r.bright_of);
  }
}

/// d length of the best pulse / d parameter.
VectorXd pulse_derivatives(const Case& c, double angle, const std::vector<Parameter>& parameters) {
  VectorXd by = VectorXd::Zero(static_cast<Eigen::Index>(parameters.size()));
  for (Eigen::Index k = 0; k + 2 < by.size(); ++k) {
    const auto& parameter = parameters[static_cast<std::size_t>(k)];
    Apparatus moved = c.truth;
    parameter.of(moved) += parameter.step;
    const double above = best_pulse(moved, angle);
    parameter.of(moved) -= 2 * parameter.step;
    by[k] = (above - best_pulse(moved, angle)) / (2 * parameter.step);
  }
  return by;
}

double xlogy(double x, double y) { return x > 0 ? x * std::log(y) : 0.0; }

double expected_gain(const Case& c) {
  double sum = 0, weight = 0;
  for (std::size_t i = 0; i < c.expected.size(); ++i) {
    sum += c.scan.weight[0][i] * c.expected[i];
    weight += c.scan.weight[0][i];
  }
  const double flat = sum / weight;
  double gain = 0;
  for (std::size_t i = 0; i < c.expected.size(); ++i) {
    const double p = std::clamp(c.expected[i], 0.0, 1.0);
    gain += 2 * c.scan.weight[0][i] * (xlogy(p, p / flat) + xlogy(1 - p, (1 - p) / (1 - flat)));
  }
  return gain;
}

}  // namespace

Bound bound(const Case& c) {
  const auto parameters = parameters_of(c);
  const auto count = static_cast<Eigen::Index>(parameters.size());
  std::vector<double> axis = c.scan.axis;
  if (c.truth.line)
    for (double& at : axis) at *= constants::kTwoPi;
  const MatrixXd by = signal_derivatives(c, axis, parameters);
  const double share = (1 - c.outlier_share) / c.overdispersion;
  MatrixXd information = MatrixXd::Zero(count, count);
  for (Eigen::Index i = 0; i < by.rows(); ++i) {
    const auto at = static_cast<std::size_t>(i);
    information += by.row(i).transpose() * by.row(i) * (share / binomial_variance(c.expected[at], c.scan.weight[0][at]));
  }
  add_known(c, parameters, information);

  // Scaled to a unit diagonal: rates and probabilities differ by ten orders of magnitude.
  const VectorXd scale = information.diagonal().cwiseMax(1e-300).cwiseSqrt().cwiseInverse();
  const Eigen::LDLT<MatrixXd> factors(MatrixXd(scale.asDiagonal() * information * scale.asDiagonal()));
  const auto sigma = [&](const VectorXd& direction) {
    const VectorXd scaled = scale.asDiagonal() * direction;
    const double variance = scaled.dot(factors.solve(scaled));
    return factors.isPositive() && variance > 0 ? std::sqrt(variance) : std::nan("");
  };
  Bound result;
  result.gain = share * expected_gain(c);
  const VectorXd rabi = VectorXd::Unit(count, 0);
  result.rabi = sigma(rabi);
  if (c.truth.line) {
    result.offset = sigma(VectorXd::Unit(count, 1));
    return result;
  }
  VectorXd generalised = rabi * (c.truth.rabi / c.truth.generalised());
  if (c.drive.carrier_uncertainty) generalised += VectorXd::Unit(count, 1) * (c.truth.detuning / c.truth.generalised());
  result.generalised = sigma(generalised);
  for (const auto& pulse : c.drive.pulses) result.pulse_s.push_back(sigma(pulse_derivatives(c, pulse.angle_rad, parameters)));
  return result;
}

}  // namespace halfturn::campaign
