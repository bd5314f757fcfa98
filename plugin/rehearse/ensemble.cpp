// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/ensemble.hpp"

#include <cmath>
#include <cstdint>

namespace halfturn::rehearse {
namespace {

double normal(Random& random) { return std::normal_distribution<double>()(random); }

/// Coupling at a random place of the cloud over that on the axis: the field of a beam of radius w falls as exp(-r^2/w^2).
double place_in_beam(const Ensemble& ensemble, Random& random) {
  const double x = ensemble.cloud_ratio * normal(random);
  const double y = ensemble.cloud_ratio * normal(random);
  return std::exp(-(x * x + y * y) * (ensemble.rabi_follows_intensity ? 2 : 1));
}

double laguerre(int order, double x) {
  double before = 1;
  double value = 1 - x;
  if (order == 0) return before;
  for (int n = 1; n < order; ++n) {
    const double next = ((2 * n + 1 - x) * value - n * before) / (n + 1);
    before = value;
    value = next;
  }
  return value;
}

double thermal_coupling(const Ensemble& ensemble, Random& random) {
  const double squared = ensemble.lamb_dicke * ensemble.lamb_dicke;
  std::geometric_distribution<int> phonons(1 / (1 + ensemble.mean_phonons));
  return std::exp(-squared / 2) * laguerre(ensemble.mean_phonons > 0 ? phonons(random) : 0, squared);
}

}  // namespace

Random seeded(std::uint64_t seed, std::uint32_t purpose) {
  std::seed_seq sequence{static_cast<std::uint32_t>(seed), static_cast<std::uint32_t>(seed >> 32), purpose};
  return Random(sequence);
}

bool Ensemble::none() const {
  return rabi_spread == 0 && detuning_spread_hz == 0 && cloud_ratio == 0 && lamb_dicke == 0;
}

Member draw_member(const Ensemble& ensemble, Random& random) {
  Member member;
  if (ensemble.rabi_spread != 0) member.rabi_scale *= 1 + ensemble.rabi_spread * normal(random);
  if (ensemble.detuning_spread_hz != 0) member.detuning_hz = ensemble.detuning_spread_hz * normal(random);
  if (ensemble.cloud_ratio != 0) member.rabi_scale *= place_in_beam(ensemble, random);
  if (ensemble.lamb_dicke != 0) member.rabi_scale *= thermal_coupling(ensemble, random);
  return member;
}

}  // namespace halfturn::rehearse
