// SPDX-License-Identifier: Apache-2.0
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/campaign/bound.hpp"
#include "tests/campaign/draws.hpp"
#include "tests/campaign/members.hpp"
#include "tests/campaign/targets.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::campaign;
using constants::kPi;
using constants::kTwoPi;

namespace {

Apparatus driven(double rabi = 1.0) {
  Apparatus a;
  a.rabi = rabi;
  return a;
}

}  // namespace

TEST_CASE("the mean over a thermal state is that of the published series") {
  // eta = 0.1, mean phonon number 5, carrier flop at Omega t = pi, 2 pi, 5 pi, 10 pi: summed with SciPy from Leibfried et al., Rev.
  // Mod. Phys. 75, 281 (2003), eq. 70.
  Apparatus a = driven();
  a.ensemble.lamb_dicke = 0.1;
  a.ensemble.mean_phonons = 5;
  const std::vector<double> at = {kPi, 2 * kPi, 5 * kPi, 10 * kPi};
  std::vector<double> mean;
  mean_population(a, at, mean);
  const std::vector<double> expected = {0.986627820, 0.049853354, 0.791239953, 0.374519357};
  for (std::size_t i = 0; i < at.size(); ++i) CHECK(mean[i] == Approx(expected[i]).margin(2e-6));
}

TEST_CASE("the best pulse of a Gaussian spread solves its equation") {
  // d/dt of exp(-(s p)^2/2) cos(p - angle) = 0, p = Omega t (the Gaussian's characteristic function): tan(p - angle) = -s^2 p.
  for (const double spread : {0.02, 0.1}) {
    for (const double angle : {kPi / 2, kPi}) {
      Apparatus a = driven();
      a.ensemble.rabi_spread = spread;
      const double phase = best_pulse(a, angle);
      CHECK(std::tan(phase - angle) == Approx(-spread * spread * phase).epsilon(0.02));
    }
  }
}

TEST_CASE("the best pulse of a cloud maximises the integral over its density") {
  // x in 0...1 with density k x^(k-1), k = w^2/(2 sigma^2), sigma = 0.3 w: the maximum of the integral of that times cos(x p - pi),
  // by SciPy's quad and minimize_scalar, stands at p = 1.146694 pi.
  Apparatus a = driven();
  a.ensemble.cloud_ratio = 0.3;
  CHECK(best_pulse(a, kPi) / kPi == Approx(1.146694).epsilon(1e-3));
}

TEST_CASE("the mean over members is that of members drawn one by one") {
  // Against brute force by the draws of the rehearsal, which know nothing of weights: 4e5 members, six of its own standard errors
  // at 4 x 6 points: 5e-8 by chance.
  for (const auto name : {"spread", "doppler", "cloud", "thermal"}) {
    const Case c = draw(*family_named(name), 11, 4);
    std::vector<double> axis, mean;
    for (std::size_t i = 0; i < 6; ++i) axis.push_back(c.scan.axis[(i + 1) * (c.scan.axis.size() - 1) / 6]);
    mean_population(c.truth, axis, mean);
    Random random(7);
    constexpr int kMembers = 400'000;
    std::vector<double> sum(axis.size()), squares(axis.size());
    for (int k = 0; k < kMembers; ++k) {
      const auto member = rehearse::draw_member(c.truth.ensemble, random);
      for (std::size_t i = 0; i < axis.size(); ++i) {
        const double p = population(c.truth, member, axis[i]);
        sum[i] += p;
        squares[i] += p * p;
      }
    }
    for (std::size_t i = 0; i < axis.size(); ++i) {
      const double drawn = sum[i] / kMembers, error = std::sqrt((squares[i] / kMembers - drawn * drawn) / kMembers);
      INFO(name << " at " << axis[i]);
      CHECK(std::abs(mean[i] - drawn) < 6 * error + 1e-6);
    }
  }
}

TEST_CASE("the members that stand for an ensemble leave an error far below the noise of counting") {
  // Against the same mean by many times as many members. The noise of counting is at least sqrt(p (1 - p)/1000) with p off 0 and 1
  // by half a count: 7e-4; the error stays below a hundredth of that in every family, over the ranges that they draw from.
  for (const auto name : {"spread", "doppler", "cloud", "line_doppler"}) {
    double worst = 0;
    for (std::uint64_t index = 0; index < 40; ++index) {
      const Case c = draw(*family_named(name), 12, index);
      std::vector<double> axis = c.scan.axis, mean, finer(axis.size());
      if (c.truth.line)
        for (double& at : axis) at *= kTwoPi;
      mean_population(c.truth, axis, mean);
      const auto& e = c.truth.ensemble;
      constexpr int kMembers = 4001;
      double whole = 0;
      for (int k = 0; k < kMembers; ++k) {
        // Simpson's rule over +-7 sigma, or over the exponential variate 0...40 of a cloud.
        const double place = static_cast<double>(k) / (kMembers - 1), simpson = k == 0 || k == kMembers - 1 ? 1 : k % 2 == 1 ? 4 : 2;
        const double z = 14 * place - 7, variate = 40 * place * place;
        rehearse::Member member;
        double weight = simpson * std::exp(-z * z / 2);
        if (e.rabi_spread > 0) member.rabi_scale = 1 + e.rabi_spread * z;
        if (e.detuning_spread_hz > 0) member.detuning_hz = e.detuning_spread_hz * z;
        if (e.cloud_ratio > 0) {
          member.rabi_scale = std::exp(-2 * e.cloud_ratio * e.cloud_ratio * (e.rabi_follows_intensity ? 2 : 1) * variate);
          weight = simpson * std::exp(-variate) * place;
        }
        whole += weight;
        for (std::size_t i = 0; i < axis.size(); ++i) finer[i] += weight * population(c.truth, member, axis[i]);
      }
      for (std::size_t i = 0; i < axis.size(); ++i) worst = std::max(worst, std::abs(mean[i] - finer[i] / whole));
    }
    INFO(name);
    CHECK(worst < 5e-6);
  }
}

TEST_CASE("a mean over an ensemble takes few members") {
  for (const auto name : {"spread", "doppler", "cloud", "line_doppler"})
    for (std::uint64_t index = 0; index < 200; ++index) {
      const Case c = draw(*family_named(name), 13, index);
      const double longest = c.truth.line ? c.truth.pulse_s : c.scan.axis.back();
      CHECK(members_of(c.truth.ensemble, c.truth.rabi * longest, longest).size() <= 256);
    }
}

TEST_CASE("flops laid on an even grid are those of single pulses") {
  for (const auto name : {"decay", "dephasing", "leak", "combinations", "thermal", "spread"}) {
    const Case c = draw(*family_named(name), 14, 3);
    std::vector<double> even = c.scan.axis, uneven = c.scan.axis, whole, single;
    mean_population(c.truth, even, whole);
    for (std::size_t i = 0; i < uneven.size(); ++i) {
      mean_population(c.truth, {&uneven[i], 1}, single);
      CHECK(whole[i] == Approx(single[0]).margin(2e-6));  // members differ with the longest pulse
    }
  }
}

TEST_CASE("counts of an ensemble scatter about its mean as counts do") {
  for (const auto name : {"spread", "doppler", "cloud", "thermal"}) {
    double chi_square = 0, points = 0;
    for (std::uint64_t index = 0; index < 40; ++index) {
      const Case c = draw(*family_named(name), 11, index);
      for (std::size_t i = 0; i < c.expected.size(); ++i) {
        const double n = c.scan.weight[0][i], p = c.expected[i];
        if (n * p * (1 - p) < 5) continue;
        chi_square += std::pow(c.scan.observed[0][i] - n * p, 2) / (n * p * (1 - p));
        points += 1;
      }
    }
    // Six sigma of a chi-square of as many degrees: 1 in 1e9 by chance.
    CHECK(std::abs(chi_square - points) < 6 * std::sqrt(2 * points));
  }
}

TEST_CASE("a square pi pulse makes a line of 0.7987 over its length") {
  // Full width at half maximum 0.798685355/t Hz: from Rabi's formula (Phys. Rev. 51, 652 (1937)) by SciPy's brentq.
  Apparatus a = driven(kTwoPi * 1e3);
  a.line = true;
  a.pulse_s = 0.5e-3;
  CHECK(line_width(a) / kTwoPi * a.pulse_s == Approx(0.798685355).epsilon(2e-3));
}

TEST_CASE("the bound with all else held is that of one parameter") {
  // One parameter: 1/sigma^2 = sum n (dp/dOmega)^2 / (p (1 - p)), p = floor + contrast sin^2(Omega t/2).
  Case c = draw(*family_named("clean"), 3, 17);
  c.drive.dead_time = infer::Known{0, 1e-9 / c.truth.rabi};
  c.drive.floor = infer::Known{c.truth.ground, 1e-9};
  c.drive.contrast = infer::Known{c.truth.excited - c.truth.ground, 1e-9};
  const double contrast = c.truth.excited - c.truth.ground;
  double information = 0;
  for (std::size_t i = 0; i < c.scan.axis.size(); ++i) {
    const double t = std::max(0.0, c.scan.axis[i] - c.truth.dead_time), n = c.scan.weight[0][i];
    const double slope = contrast * t / 2 * std::sin(c.truth.rabi * t);
    const double p = std::clamp(c.truth.ground + contrast * std::pow(std::sin(c.truth.rabi * t / 2), 2), 0.5 / n, 1 - 0.5 / n);
    information += n * slope * slope / (p * (1 - p));
  }
  CHECK(bound(c).rabi == Approx(1 / std::sqrt(information)).epsilon(1e-4));
}

TEST_CASE("tails of the binomial law are SciPy's") {
  // scipy.stats.binom.sf(k - 1, n, p)
  CHECK(probability_at_least(3, 2000, 3e-6) == Approx(3.578488977e-08).epsilon(1e-8));
  CHECK(probability_at_least(440, 455, 0.94) == Approx(6.338538859e-03).epsilon(1e-8));
  CHECK(probability_at_least(0, 10, 0.5) == 1);
}

TEST_CASE("a scan depends on seed, family and index alone") {
  const Case a = draw(*family_named("decay"), 1, 5), b = draw(*family_named("decay"), 1, 5), other = draw(*family_named("decay"), 1, 6);
  CHECK(a.scan.observed == b.scan.observed);
  CHECK(a.scan.axis == b.scan.axis);
  CHECK(a.truth.rabi != other.truth.rabi);
}
