// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/members.hpp"

#include <algorithm>
#include <array>
#include <cmath>

#include "model/quantity/constants.hpp"

namespace halfturn::campaign {
namespace {

using constants::kPi;
using constants::kTwoPi;

constexpr double kReach = 5.5;    // standard deviations; 4e-8 of a Gaussian lies beyond
constexpr double kMargin = 6;     // rad per standard deviation between the phase and its alias: exp(-18)
constexpr double kLeftOut = 1e-6; // of a thermal state's weight

/// Places (in standard deviations) and weights of a Gaussian whose members' phases run by `phase` a standard deviation.
template <class Place>
std::vector<Share> gaussian(double phase, const Place& place) {
  const int half = std::max(8, static_cast<int>(std::ceil(kReach * (phase + kMargin) / kTwoPi)));
  const double step = kReach / half;
  std::vector<Share> all;
  double whole = 0;
  for (int i = -half; i <= half; ++i) {
    const double z = i * step;
    all.push_back({place(z), std::exp(-z * z / 2)});
    whole += all.back().weight;
  }
  for (auto& share : all) share.weight /= whole;
  return all;
}

/// Nodes on 0...1 and weights of Fejer's first rule.
struct Rule {
  std::vector<double> at, weight;
};
Rule fejer(int count) {
  Rule rule;
  for (int i = 0; i < count; ++i) {
    const double angle = (i + 0.5) * kPi / count;
    double sum = 0.5;
    for (int j = 1; j <= count / 2; ++j) sum -= std::cos(2 * j * angle) / (4.0 * j * j - 1);
    rule.at.push_back(0.5 * (1 + std::cos(angle)));
    rule.weight.push_back(2 * sum / count);
  }
  return rule;
}

/// A rule for an integrand of so many oscillations and so high a power.
const Rule& rule_for(double phase, double power) {
  static const std::array<Rule, 4> rules = {fejer(64), fejer(128), fejer(192), fejer(256)};
  // Chebyshev series of cos(phase x) and x^power end at phase/2 and some 5 sqrt(power); each needs a margin.
  const double needed = 0.5 * phase + 5 * std::sqrt(power) + 24;
  for (const auto& rule : rules)
    if (static_cast<double>(rule.at.size()) >= needed) return rule;
  return rules.back();
}

std::vector<Share> cloud(const rehearse::Ensemble& e, double phase) {
  const double power = 0.5 / (e.cloud_ratio * e.cloud_ratio) * (e.rabi_follows_intensity ? 0.5 : 1);
  const Rule& rule = rule_for(phase, power);
  std::vector<Share> all;
  double whole = 0;
  for (std::size_t i = 0; i < rule.at.size(); ++i) {
    const double weight = rule.weight[i] * power * std::pow(rule.at[i], power - 1);
    whole += weight;
    if (weight > 1e-12) all.push_back({{rule.at[i], 0}, weight});
  }
  for (auto& share : all) share.weight /= whole;
  return all;
}

/// Every phonon number: carrier couplings exp(-eta^2/2) L_n(eta^2) (Leibfried et al., Rev. Mod. Phys. 75, 281 (2003), eq. 70), by
/// the recurrence of the Laguerre polynomials.
std::vector<Share> thermal(const rehearse::Ensemble& e) {
  const double ratio = e.mean_phonons / (1 + e.mean_phonons), x = e.lamb_dicke * e.lamb_dicke;
  std::vector<Share> all;
  double left = 1, before = 0, laguerre = 1;
  for (int n = 0; left > kLeftOut; ++n) {
    const double weight = left * (1 - ratio);
    all.push_back({{std::exp(-x / 2) * laguerre, 0}, weight});
    left -= weight;
    const double next = ((2 * n + 1 - x) * laguerre - n * before) / (n + 1);
    before = laguerre;
    laguerre = next;
  }
  for (auto& share : all) share.weight /= 1 - left;
  return all;
}

}  // namespace

std::vector<Share> members_of(const rehearse::Ensemble& e, double phase, double drift_s) {
  if (e.mean_phonons > 0 && e.lamb_dicke > 0) return thermal(e);
  if (e.rabi_spread > 0) return gaussian(e.rabi_spread * phase, [&](double z) { return rehearse::Member{1 + e.rabi_spread * z, 0}; });
  if (e.detuning_spread_hz > 0)
    return gaussian(kTwoPi * e.detuning_spread_hz * drift_s, [&](double z) { return rehearse::Member{1, e.detuning_spread_hz * z}; });
  if (e.cloud_ratio > 0) return cloud(e, phase);
  return {{{}, 1.0}};
}

}  // namespace halfturn::campaign
