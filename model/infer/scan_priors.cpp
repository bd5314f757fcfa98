// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/dead_time.hpp"
#include "model/infer/scan_objective.hpp"

/// What is known beside the scan's points: references and priors.
namespace halfturn::infer {
namespace {

double held_sigma(const Known& known) { return std::max(known.sigma, 1e-6); }

double square(double x) { return x * x; }

/// log cosh(x) without overflow.
double log_cosh(double x) {
  const double a = std::abs(x);
  return a + std::log1p(std::exp(-2.0 * a)) - std::log(2.0);
}

}  // namespace

bool ScanObjective::add_references(const Physical& p, double& value, Vector* gradient, Matrix* information) const {
  if (!scan_.references || readout_.kind == Readout::Kind::gaussian) return true;
  const auto& r = *scan_.references;
  const int bright_slot = negative_contrast_ ? layout_.ground : layout_.excited;
  const int dark_slot = negative_contrast_ ? layout_.excited : layout_.ground;
  const double bright = negative_contrast_ ? p.signal_ground : p.signal_excited;
  const double dark = negative_contrast_ ? p.signal_excited : p.signal_ground;
  auto add = [&](double observed, double weight, double mean, int slot) {
    double half_deviance = 0.0, score = 0.0, info = 0.0;
    const Readout one{readout_.kind, {&observed, 1}, {&weight, 1}};
    if (!infer::evaluate(one, {&mean, 1}, half_deviance, {&score, 1}, {&info, 1})) return false;
    value += half_deviance;
    if (gradient != nullptr) (*gradient)[slot] += score;
    if (information != nullptr) (*information)(slot, slot) += info;
    return true;
  };
  return add(r.bright, r.bright_of, bright, bright_slot) && add(r.dark, r.dark_of, dark, dark_slot);
}

bool ScanObjective::add_priors(const Physical& p, double& value, Vector* gradient, Matrix* information) const {
  auto add = [&](int slot, double excess, double slope, double curvature) {
    value += excess;
    if (slot < 0) return;
    if (gradient != nullptr) (*gradient)[slot] += slope;
    if (information != nullptr) (*information)(slot, slot) += curvature;
  };
  auto normal = [&](int slot, double x, double mean, double sigma) {
    const double z = (x - mean) / sigma;
    add(slot, 0.5 * z * z, z / sigma, 1.0 / square(sigma));
  };
  if (layout_.dead_time >= 0) {
    const auto tail = contaminated((p.dead_time - prior_.dead_time.mean) / prior_.dead_time.sigma);
    const double sigma = prior_.dead_time.sigma;
    add(layout_.dead_time, tail.value, tail.slope / sigma, tail.curvature / square(sigma));
  }
  if (prior_.floor) normal(layout_.ground, p.signal_ground, prior_.floor->mean, held_sigma(*prior_.floor));
  if (prior_.contrast) {
    const double sigma = held_sigma(*prior_.contrast);
    const double z = (p.contrast() - prior_.contrast->mean) / sigma;
    add(layout_.excited, 0.5 * z * z, z / sigma, 1.0 / square(sigma));
    add(layout_.ground, 0.0, -z / sigma, 1.0 / square(sigma));
    if (information != nullptr) {
      (*information)(layout_.ground, layout_.excited) -= 1.0 / square(sigma);
      (*information)(layout_.excited, layout_.ground) -= 1.0 / square(sigma);
    }
  }
  if (layout_.detuning_square >= 0) {
    // Delta of either sign with a normal prior, seen through q = Delta^2 alone: -ln(N(sqrt q) + N(-sqrt q)) up to a constant.
    const double sigma = prior_.detuning->sigma, mean = std::abs(prior_.detuning->mean);
    const double root = std::sqrt(std::max(p.detuning_square, 1e-12 * square(sigma))), a = mean / square(sigma);
    const double tangent = std::tanh(a * root);
    const double curvature = -(square(a) * (1.0 - square(tangent)) / (4.0 * square(root)) - a * tangent / (4.0 * root * square(root)));
    add(layout_.detuning_square, 0.5 * (p.detuning_square + square(mean)) / square(sigma) - log_cosh(a * root),
        0.5 / square(sigma) - 0.5 * a * tangent / root, std::max(0.0, curvature));
  }
  if (layout_.drift >= 0) normal(layout_.drift, p.drift, prior_.drift->mean, prior_.drift->sigma);
  if (scan_.kind == Axis::detuning && prior_.log_rabi && lead_.kind != Lead::Kind::pulse_length) {
    // History tracks the ensemble's mean, which is the mean lead itself.
    const Factor factor = lead_factor(p);
    const bool mean = lead_.kind == Lead::Kind::mean;
    const double sigma = held_sigma(*prior_.log_rabi), z = (std::log(p.generalised * factor.value) - prior_.log_rabi->mean) / sigma;
    const double by_lead = 1.0 / (mean ? p.generalised * factor.value : p.generalised), by_breadth = mean ? 0.0 : factor.by_breadth / factor.value;
    add(layout_.lead, 0.5 * z * z, z / sigma * by_lead, square(by_lead / sigma));
    add(layout_.breadth, 0.0, z / sigma * by_breadth, square(by_breadth / sigma));
    if (layout_.breadth >= 0 && information != nullptr) {
      (*information)(layout_.lead, layout_.breadth) += by_lead * by_breadth / square(sigma);
      (*information)(layout_.breadth, layout_.lead) += by_lead * by_breadth / square(sigma);
    }
  }
  return true;
}

}  // namespace halfturn::infer
