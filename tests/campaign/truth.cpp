// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/truth.hpp"

#include <algorithm>
#include <cmath>
#include <utility>

#include "model/infer/statistics.hpp"
#include "model/quantity/constants.hpp"
#include "plugin/rehearse/integrator.hpp"

namespace halfturn::campaign {
namespace {

struct Slice {
  rehearse::Member member;
  double weight;
};

double middle(int i, int slices) { return (i + 0.5) / slices; }

/// One spread at a time: the families have no two together.
std::vector<Slice> slices_of(const Ensemble& e, int slices) {
  std::vector<Slice> all;
  if (e.mean_phonons > 0 && e.lamb_dicke > 0) {
    const double ratio = e.mean_phonons / (1 + e.mean_phonons), squared = e.lamb_dicke * e.lamb_dicke;
    double left = 1;
    for (unsigned n = 0; left > 1e-6; ++n) {
      const double weight = left * (1 - ratio);
      all.push_back({{std::exp(-squared / 2) * std::laguerre(n, squared), 0}, weight});
      left -= weight;
    }
    return all;
  }
  if (e.none()) return {{{}, 1.0}};
  for (int i = 0; i < slices; ++i) {
    const double u = middle(i, slices), z = infer::normal_quantile(u);
    rehearse::Member member;
    if (e.rabi_spread > 0) member.rabi_scale = 1 + e.rabi_spread * z;
    if (e.detuning_spread_hz > 0) member.detuning_hz = e.detuning_spread_hz * z;
    // x = exp(-r^2/w^2) with r^2 = 2 sigma^2 times an exponential variate: x = u^(2 ratio^2); its square where Omega goes with
    // intensity.
    if (e.cloud_ratio > 0) member.rabi_scale = std::pow(u, (e.rabi_follows_intensity ? 4 : 2) * e.cloud_ratio * e.cloud_ratio);
    all.push_back({member, 1.0 / slices});
  }
  return all;
}

double excited_after(const Apparatus& a, double rabi, double detuning, double length_s) {
  if (!a.damped()) return rehearse::undamped_population(rabi, detuning, length_s);
  return rehearse::after_square_pulse({rabi, detuning, a.decay, a.loss, a.dephasing}, length_s).excited;
}

/// Highest point of a smooth function between two lengths: a scan, then the root of its slope.
template <class F>
double maximiser(const F& value_and_slope, double low, double high) {
  constexpr int kSteps = 24;
  const double step = (high - low) / kSteps;
  double best = low, most = value_and_slope(low).first;
  for (int i = 1; i <= kSteps; ++i) {
    const double value = value_and_slope(low + i * step).first;
    if (value > most) {
      most = value;
      best = low + i * step;
    }
  }
  double a = best - step, b = best + step;
  for (int i = 0; i < 36; ++i) {  // to 1e-12 of the length
    const double middle_of = (a + b) / 2;
    (value_and_slope(middle_of).second > 0 ? a : b) = middle_of;
  }
  return (a + b) / 2;
}

}  // namespace

double Apparatus::generalised() const { return std::hypot(rabi, detuning); }

double population(const Apparatus& a, const rehearse::Member& member, double at) {
  const double member_detuning = constants::kTwoPi * member.detuning_hz;
  const double rabi = a.rabi * member.rabi_scale;
  if (a.line) {
    const double length = a.pulse_s - a.dead_time;
    double sum = excited_after(a, rabi, at - a.detuning + member_detuning, length);
    if (a.second_weight > 0) sum += a.second_weight * (1 - sum) * excited_after(a, rabi, at - a.second_detuning + member_detuning, length);
    return sum;
  }
  const double length = at - a.dead_time;
  const double first = excited_after(a, rabi, a.detuning + member_detuning, length);
  if (!(a.second_weight > 0)) return first;
  return (1 - a.second_weight) * first + a.second_weight * excited_after(a, rabi * a.second_ratio, a.detuning, length);
}

void mean_population(const Apparatus& apparatus, std::span<const double> axis, int slices, std::vector<double>& mean) {
  mean.assign(axis.size(), 0.0);
  for (const auto& slice : slices_of(apparatus.ensemble, slices))
    for (std::size_t i = 0; i < axis.size(); ++i) mean[i] += slice.weight * population(apparatus, slice.member, axis[i]);
}

double best_pulse(const Apparatus& a, double angle_rad) {
  const double plain = angle_rad / a.generalised();
  if (a.ensemble.none() && !(a.second_weight > 0)) return a.dead_time + plain;
  if (a.ensemble.detuning_spread_hz > 0) return a.dead_time + plain;  // every member has the same coupling
  auto slices = slices_of(a.ensemble, 200);
  if (a.second_weight > 0) {
    slices.front().weight = 1 - a.second_weight;
    slices.push_back({{a.second_ratio, 0}, a.second_weight});
  }
  const auto turned = [&](double length) {
    std::pair<double, double> sum{0, 0};
    for (const auto& slice : slices) {
      const double rate = slice.member.rabi_scale * a.generalised();
      sum.first += slice.weight * std::cos(rate * length - angle_rad);
      sum.second -= slice.weight * rate * std::sin(rate * length - angle_rad);
    }
    return sum;
  };
  // The best length lies near the plain one; in a cloud of 0.5 w it is half as long again.
  return a.dead_time + maximiser(turned, 0.5 * plain, 2.0 * plain);
}

double line_width(const Apparatus& apparatus) {
  Apparatus a = apparatus;
  a.second_weight = 0;
  const double damping = a.decay + a.loss + a.dephasing;
  const double reach = 4 * (a.rabi + damping + constants::kTwoPi * a.ensemble.detuning_spread_hz) + 4 * constants::kPi / a.pulse_s;
  constexpr int kSteps = 400;
  std::vector<double> axis, moved;
  for (int i = 0; i <= kSteps; ++i) axis.push_back(a.detuning + reach * i / kSteps);
  mean_population(a, axis, 50, moved);
  const double half = 0.5 * *std::max_element(moved.begin(), moved.end());
  int outside = kSteps;
  while (outside > 0 && moved[static_cast<std::size_t>(outside - 1)] < half) --outside;
  const auto i = static_cast<std::size_t>(std::max(1, outside));
  const double part = (moved[i - 1] - half) / std::max(moved[i - 1] - moved[i], 1e-300);
  return 2 * reach / kSteps * (static_cast<double>(i - 1) + std::clamp(part, 0.0, 1.0));
}

}  // namespace halfturn::campaign
