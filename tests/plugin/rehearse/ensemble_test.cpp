// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/ensemble.hpp"

#include <cmath>
#include <functional>

#include "model/quantity/constants.hpp"
#include "plugin/rehearse/integrator.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::rehearse;
using halfturn::constants::kPi;

namespace {

constexpr int kMembers = 200000;

struct Mean {
  double value;
  double error;
};

Mean average(const Ensemble& ensemble, const std::function<double(const Member&)>& of) {
  Random random = seeded(20, 1);
  double sum = 0;
  double squares = 0;
  for (int i = 0; i < kMembers; ++i) {
    const double value = of(draw_member(ensemble, random));
    sum += value;
    squares += value * value;
  }
  const double mean = sum / kMembers;
  return {mean, std::sqrt((squares / kMembers - mean * mean) / kMembers)};
}

}  // namespace

// Seeds are fixed, so these pass or fail for good; a new seed would miss by 4.5 standard errors once in 150,000 checks.

TEST_CASE("A thermal motional state gives the carrier flop of the textbook") {
  // Lamb-Dicke parameter 0.1, 5 phonons, Omega t = pi, 2 pi, 5 pi, 10 pi; summed with SciPy by Leibfried et al., Rev. Mod. Phys.
  // 75, 281 (2003), eqs. 70 and 74.
  Ensemble ensemble;
  ensemble.lamb_dicke = 0.1;
  ensemble.mean_phonons = 5;
  const double wanted[4][2] = {{1, 0.986627820}, {2, 0.049853354}, {5, 0.791239953}, {10, 0.374519357}};
  for (const auto& [half_turns, excited] : wanted) {
    const auto mean = average(ensemble, [turns = half_turns](const Member& m) {
      return undamped_population(m.rabi_scale, 0, turns * kPi);
    });
    CHECK(std::abs(mean.value - excited) < 4.5 * mean.error);
  }
}

TEST_CASE("In its motional ground state an atom sees the Debye-Waller factor alone") {
  // Omega_00/Omega = exp(-eta^2/2): 0.995012479 for eta = 0.1 (Leibfried et al. 2003).
  Ensemble ensemble;
  ensemble.lamb_dicke = 0.1;
  Random random = seeded(1, 1);
  CHECK(draw_member(ensemble, random).rabi_scale == Approx(0.995012479).margin(1e-9));
}

TEST_CASE("A Gaussian cloud in a Gaussian beam has couplings of density kappa x^(kappa - 1)") {
  // Change of variables of the two-dimensional Gaussian: kappa = w^2/(2 sigma^2), mean kappa/(kappa + 1), mean square
  // kappa/(kappa + 2); half that kappa where the coupling goes with intensity.
  Ensemble ensemble;
  ensemble.cloud_ratio = 0.3;
  for (const bool intensity : {false, true}) {
    ensemble.rabi_follows_intensity = intensity;
    const double kappa = 1 / (0.09 * (intensity ? 4 : 2));
    const auto mean = average(ensemble, [](const Member& m) { return m.rabi_scale; });
    const auto square = average(ensemble, [](const Member& m) { return m.rabi_scale * m.rabi_scale; });
    CHECK(std::abs(mean.value - kappa / (kappa + 1)) < 4.5 * mean.error);
    CHECK(std::abs(square.value - kappa / (kappa + 2)) < 4.5 * square.error);
  }
}

TEST_CASE("A Gaussian spread of the Rabi frequency damps the flop by its characteristic function") {
  // <cos(x a)> = cos(a) exp(-(s a)^2/2) for x of mean 1 and standard deviation s.
  Ensemble ensemble;
  ensemble.rabi_spread = 0.03;
  ensemble.detuning_spread_hz = 250;
  const double area = 7 * kPi;
  const auto mean = average(ensemble, [&](const Member& m) { return undamped_population(m.rabi_scale, 0, area); });
  CHECK(std::abs(mean.value - 0.5 * (1 - std::cos(area) * std::exp(-std::pow(0.03 * area, 2) / 2))) < 4.5 * mean.error);
  const auto spread = average(ensemble, [](const Member& m) { return m.detuning_hz * m.detuning_hz; });
  CHECK(std::abs(spread.value - 250.0 * 250.0) < 4.5 * spread.error);
}
