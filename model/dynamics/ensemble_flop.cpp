// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/ensemble_flop.hpp"

#include <algorithm>
#include <cmath>

#include "model/dynamics/four.hpp"
#include "model/quantity/clones.hpp"
#include "model/quantity/elementary.hpp"

namespace halfturn::dynamics::detail {

using namespace elementary;

namespace {

constexpr std::size_t kWidth = 8;      // members side by side: two AVX2 registers
constexpr std::size_t kRestart = 512;  // points; as many products of relative error 2e-16 stay below 1e-13

/// Members as arrays of a whole number of kWidth, filled up with members of weight 0.
struct Lanes {
  double *frequency, *weight, *by_weight, *scaled, *by_scaled;  // x Omega, w, dw/dp, w x, w dx/dp
  double *cosine, *sine, *step_cosine, *step_sine;
  std::size_t count;
};

Lanes lanes_of(double rabi, const Members& members, std::vector<double>& scratch) {
  const std::size_t count = (members.size() + kWidth - 1) / kWidth * kWidth;
  if (scratch.size() < 9 * count) scratch.resize(9 * count);
  double* row = scratch.data();
  std::fill_n(row, 9 * count, 0.0);
  Lanes lanes{};
  for (double** field : {&lanes.frequency, &lanes.weight, &lanes.by_weight, &lanes.scaled, &lanes.by_scaled, &lanes.cosine,
                         &lanes.sine, &lanes.step_cosine, &lanes.step_sine}) {
    *field = row;
    row += count;
  }
  lanes.count = count;
  for (std::size_t j = 0; j < members.size(); ++j) {
    lanes.frequency[j] = rabi * members.scale[j];
    lanes.weight[j] = members.weight[j];
    lanes.by_weight[j] = members.by_weight[j];
    lanes.scaled[j] = members.weight[j] * members.scale[j];
    lanes.by_scaled[j] = members.weight[j] * members.by_scale[j];
  }
  return lanes;
}

}  // namespace

HALFTURN_CLONES void spread_sums(double rabi, double sigma, const double* t, std::size_t points, double* fall, double* by_theta,
                                 double* by_parameter) {
  for (std::size_t k = 0; k < points; ++k) {
    const double theta = rabi * t[k], width = sigma * theta;
    const double size = decaying_exponential(-0.5 * width * width);
    const SineCosine at = sine_cosine(theta);
    const double mean = size * at.cosine;
    fall[k] = 1 - mean;
    by_theta[k] = size * at.sine + sigma * width * mean;
    by_parameter[k] = width * theta * mean;
  }
}

HALFTURN_CLONES void turn_lanes(const double* frequency, double t, std::size_t count, double* cosine, double* sine) {
  for (std::size_t j = 0; j < count; ++j) {
    const SineCosine at = sine_cosine(frequency[j] * t);
    cosine[j] = at.cosine;
    sine[j] = at.sine;
  }
}

/// The sums at one length; then turns each member on by a step.
HALFTURN_CLONES FlopSums sum_and_advance(const Lanes& lanes, double theta) {
  Four mean[2] = {}, by_theta[2] = {}, by_weight[2] = {}, by_scale[2] = {};
  for (std::size_t i = 0; i < lanes.count; i += kWidth)
    for (std::size_t half = 0; half < 2; ++half) {
      const std::size_t j = i + 4 * half;
      Four cosine, sine, weight, weight_slope, scaled, scaled_slope, step_cosine, step_sine;
      load(lanes.cosine + j, cosine);
      load(lanes.sine + j, sine);
      load(lanes.weight + j, weight);
      load(lanes.by_weight + j, weight_slope);
      load(lanes.scaled + j, scaled);
      load(lanes.by_scaled + j, scaled_slope);
      load(lanes.step_cosine + j, step_cosine);
      load(lanes.step_sine + j, step_sine);
      mean[half] += weight * cosine;
      by_weight[half] += weight_slope * cosine;
      by_theta[half] += scaled * sine;
      by_scale[half] += scaled_slope * sine;
      store(cosine * step_cosine - sine * step_sine, lanes.cosine + j);
      store(cosine * step_sine + sine * step_cosine, lanes.sine + j);
    }
  const Four sum_weight = by_weight[0] + by_weight[1], sum_scale = by_scale[0] + by_scale[1];
  const Four sum_mean = mean[0] + mean[1], sum_theta = by_theta[0] + by_theta[1];
  return {1 - total(sum_mean), total(sum_theta), theta * total(sum_scale) - total(sum_weight)};
}

void spread_flop(double rabi, double sigma, const double* t, std::size_t points, const FlopRows& rows) {
  spread_sums(rabi, sigma, t, points, rows.fall, rows.by_theta, rows.by_parameter);
}

void members_flop(double rabi, const Members& members, const double* t, double step, std::size_t points,
                  std::vector<double>& scratch, const FlopRows& rows) {
  const Lanes lanes = lanes_of(rabi, members, scratch);
  if (step > 0) turn_lanes(lanes.frequency, step, lanes.count, lanes.step_cosine, lanes.step_sine);
  for (std::size_t k = 0; k < points; ++k) {
    if (step <= 0 || k % kRestart == 0) turn_lanes(lanes.frequency, t[k], lanes.count, lanes.cosine, lanes.sine);
    const FlopSums sums = sum_and_advance(lanes, rabi * t[k]);
    rows.fall[k] = sums.fall;
    rows.by_theta[k] = sums.by_theta;
    rows.by_parameter[k] = sums.by_parameter;
  }
}

}  // namespace halfturn::dynamics::detail
