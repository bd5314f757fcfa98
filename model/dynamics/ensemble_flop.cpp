// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/ensemble_flop.hpp"

#include <algorithm>
#include <cmath>

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

HALFTURN_CLONES FlopSums sum_lanes(const Lanes& lanes, double theta) {
  double mean[kWidth] = {}, by_theta[kWidth] = {}, by_weight[kWidth] = {}, by_scale[kWidth] = {};
  for (std::size_t i = 0; i < lanes.count; i += kWidth)
    for (std::size_t j = 0; j < kWidth; ++j) {
      const double cosine = lanes.cosine[i + j], sine = lanes.sine[i + j];
      mean[j] += lanes.weight[i + j] * cosine;
      by_weight[j] += lanes.by_weight[i + j] * cosine;
      by_theta[j] += lanes.scaled[i + j] * sine;
      by_scale[j] += lanes.by_scaled[i + j] * sine;
    }
  FlopSums sums{1, 0, 0};
  for (std::size_t j = 0; j < kWidth; ++j) {
    sums.fall -= mean[j];
    sums.by_theta += by_theta[j];
    sums.by_parameter += theta * by_scale[j] - by_weight[j];
  }
  return sums;
}

HALFTURN_CLONES void advance_lanes(double* cosine, double* sine, const double* step_cosine, const double* step_sine,
                                   std::size_t count) {
  for (std::size_t j = 0; j < count; ++j) {
    const double c = cosine[j], s = sine[j];
    cosine[j] = c * step_cosine[j] - s * step_sine[j];
    sine[j] = c * step_sine[j] + s * step_cosine[j];
  }
}

void spread_flop(double rabi, double sigma, const double* t, std::size_t points, const FlopRows& rows) {
  spread_sums(rabi, sigma, t, points, rows.fall, rows.by_theta, rows.by_parameter);
}

void members_flop(double rabi, const Members& members, const double* t, double step, std::size_t points,
                  std::vector<double>& scratch, const FlopRows& rows) {
  const Lanes lanes = lanes_of(rabi, members, scratch);
  if (step > 0) turn_lanes(lanes.frequency, step, lanes.count, lanes.step_cosine, lanes.step_sine);
  for (std::size_t k = 0; k < points; ++k) {
    if (step > 0 && k % kRestart != 0) {
      advance_lanes(lanes.cosine, lanes.sine, lanes.step_cosine, lanes.step_sine, lanes.count);
    } else {
      turn_lanes(lanes.frequency, t[k], lanes.count, lanes.cosine, lanes.sine);
    }
    const FlopSums sums = sum_lanes(lanes, rabi * t[k]);
    rows.fall[k] = sums.fall;
    rows.by_theta[k] = sums.by_theta;
    rows.by_parameter[k] = sums.by_parameter;
  }
}

}  // namespace halfturn::dynamics::detail
