// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <string>

#include "model/atom/light.hpp"
#include "model/quantity/constants.hpp"
#include "tests/model/atom/lines.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::atom;
using namespace halfturn::tests;
using constants::kDipoleAtomicUnit;

namespace {

Level state(int twice_J, int parity, std::optional<int> twice_F, std::optional<int> twice_m) {
  Level made = level("level", twice_J, parity);
  made.twice_F = twice_F;
  made.twice_m = twice_m;
  return made;
}

/// Rb-87 D2, F = 2 m = 2 to F' = 3 m' = 3, by Steck's numbers.
InlineTransition rubidium() {
  InlineTransition given;
  given.name = "mine";
  given.wavelength_m = 780.241209686e-9;
  given.linewidth_hz = 6.06656e6;
  given.branching = 1.0;
  given.twice_I = 3;
  given.lower = state(1, 1, 4, 4);
  given.upper = state(3, -1, 6, 6);
  given.polarisation = Polarisation::sigma_plus;
  return given;
}

Transition made(const InlineTransition& given) {
  auto transition = inline_transition(given);
  INFO((transition ? "" : transition.error().message));
  REQUIRE(transition);
  return *transition;
}

void refuses(const InlineTransition& given, const std::string& words) {
  const auto transition = inline_transition(given);
  REQUIRE_FALSE(transition);
  INFO("message: " << transition.error().message);
  CHECK(transition.error().message.find(words) != std::string::npos);
}

}  // namespace

TEST_CASE("a transition by its numbers is the catalogue's") {
  // Steck, "Rubidium 87 D Line Data" (as quoted): cycling Isat 1.66933(49) mW/cm^2; d_S/sqrt(2) = 2.98931 e a0 of Rb-85 to
  // 4e-6.
  const auto transition = made(rubidium());
  CHECK(saturation_intensity(transition).value() == Approx(16.6933).epsilon(1e-5));
  CHECK(*transition.dipole_C_m / kDipoleAtomicUnit == Approx(4.22752 / std::sqrt(2.0)).epsilon(3e-6));
  CHECK(*transition.state_linewidth_hz == Approx(6.06656e6).epsilon(1e-12));
  CHECK(transition.assumed.empty());
}

TEST_CASE("an angular factor stands for states that are not named") {
  auto given = rubidium();
  given.lower = state(1, 1, {}, {});
  given.upper = state(3, -1, {}, {});
  refuses(given, "angular factor");
  given.angular_factor = 1.0 / std::sqrt(2.0);
  CHECK(*made(given).dipole_C_m == Approx(*made(rubidium()).dipole_C_m).epsilon(1e-13));
  given.angular_factor = 1.0;  // the reduced element itself is no matrix element of two states here
  refuses(given, "at most 0.70711");
  auto both = rubidium();
  both.angular_factor = -0.70711;
  CHECK(made(both).dipole_C_m);
  both.angular_factor = 1.0 / std::sqrt(3.0);
  refuses(both, "the stated states give 0.70711");
}

TEST_CASE("J = 1/2 to 1/2 has no closed component") {
  // d_S/sqrt(3) for pi, d_S sqrt(2/3) for sigma (common textbook values).
  auto given = rubidium();
  given.twice_I = 0;
  given.lower = state(1, 1, {}, 1);
  given.upper = state(1, -1, {}, 1);
  given.polarisation = Polarisation::pi;
  CHECK(*made(given).dipole_C_m == Approx(*made(given).reduced_dipole_C_m / std::sqrt(3.0)).epsilon(1e-14));
  given.upper = state(1, -1, {}, -1);
  given.polarisation = Polarisation::sigma_minus;
  CHECK(*made(given).dipole_C_m == Approx(*made(given).reduced_dipole_C_m * std::sqrt(2.0 / 3.0)).epsilon(1e-14));
}

TEST_CASE("a stated moment stands and is exempt from the rules") {
  InlineTransition given;
  given.frequency_hz = 429.228e12;
  given.moment_C_m = 1e-33;
  given.lower = state(0, 1, {}, 0);
  given.upper = state(0, -1, {}, 0);
  CHECK(*made(given).dipole_C_m == 1e-33);
  given.moment_C_m.reset();
  given.linewidth_hz = 1e-3;
  refuses(given, "J = 0 does not go to J' = 0");
  given.multipole = Multipole::induced;
  CHECK_FALSE(made(given).dipole_C_m);
}

TEST_CASE("a moment larger than its linewidth allows") {
  auto given = rubidium();
  given.moment_C_m = 2.53444e-29;  // Steck: the cycling moment
  CHECK(*made(given).dipole_C_m == 2.53444e-29);
  given.moment_C_m = 3.58424e-29;  // d_S, sqrt(2) larger
  refuses(given, "not a reduced one");
  given.moment_C_m = 2.0e-29;
  refuses(given, "branching and states give");
  given.branching.reset();  // then a smaller moment may come from a decay elsewhere
  CHECK(*made(given).dipole_C_m == 2.0e-29);
}

TEST_CASE("numbers that contradict each other") {
  auto given = rubidium();
  given.frequency_hz = 384.2305e12;
  CHECK(made(given).frequency_hz == 384.2305e12);
  given.frequency_hz = 299792458.0 / 780.241209686e-9 / 1.000269;  // as if the wavelength were one in air
  refuses(given, "wavelength in air");
  auto lifetime = rubidium();
  lifetime.lifetime_s = 26.2348e-9;
  CHECK(made(lifetime).linewidth_hz);
  lifetime.linewidth_hz = 38.117e6;
  refuses(lifetime, "2 pi");
  lifetime.linewidth_hz = 7e6;
  refuses(lifetime, "the stated lifetime gives 6.0666 MHz");
}

TEST_CASE("what it takes is asked for") {
  InlineTransition given;
  refuses(given, "neither a vacuum wavelength nor a frequency");
  given.wavelength_m = 780e-9;
  refuses(given, "no linewidth, lifetime or moment");
  given.linewidth_hz = 6e6;
  refuses(given, "needs both levels");
  given.lower = state(1, 1, {}, 1);
  given.upper = state(1, -1, {}, 1);
  CHECK(made(given).assumed.size() == 1);
  for (const double wrong : {0.0, -1.0, std::nan(""), HUGE_VAL}) {
    auto broken = rubidium();
    broken.linewidth_hz = wrong;
    refuses(broken, "above 0");
  }
  auto branching = rubidium();
  branching.branching = 1.5;
  refuses(branching, "at most 1");
}

TEST_CASE("the rules bind a transition by its numbers") {
  auto parity = rubidium();
  parity.upper->parity = 1;
  refuses(parity, "parity must change");
  auto spin = rubidium();
  spin.lower->twice_S = 1;
  spin.upper->twice_S = 3;
  CHECK(made(spin).dipole_C_m);  // a change of spin forbids nothing
  auto total = rubidium();
  total.upper->twice_J = 5;
  refuses(total, "J may change by 0 or 1 only");
  auto light = rubidium();
  light.polarisation = Polarisation::pi;
  refuses(light, "pi polarisation changes m by 0");
  auto zero = rubidium();
  zero.twice_I = 0;
  zero.lower = state(2, 1, {}, 0);
  zero.upper = state(2, -1, {}, 0);
  zero.polarisation = Polarisation::pi;
  refuses(zero, "where J' = J");
  auto large = rubidium();
  large.twice_I = 40;
  refuses(large, "at most 10");
}

TEST_CASE("words of kinds, polarisations and statuses") {
  for (const auto kind : {Multipole::electric_dipole, Multipole::magnetic_dipole, Multipole::electric_quadrupole,
                          Multipole::two_photon, Multipole::induced}) {
    CHECK(read_multipole(name_of(kind), "kind").value() == kind);
  }
  CHECK(read_multipole("E1", "kind").error().message.find("electric_dipole, magnetic_dipole") != std::string::npos);
  for (const auto light : {Polarisation::sigma_minus, Polarisation::pi, Polarisation::sigma_plus}) {
    CHECK(read_polarisation(name_of(light)) == light);
  }
  CHECK(read_polarisation("\u03c3+") == Polarisation::sigma_plus);
  CHECK_FALSE(read_polarisation("sigma"));
  for (const auto status : {Status::read, Status::quoted, Status::recalled})
    CHECK(read_status(name_of(status), "status").value() == status);
  CHECK(read_parity("odd", "parity").value() == -1);
  CHECK_FALSE(read_parity("+", "parity"));
}
