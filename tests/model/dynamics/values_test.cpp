// SPDX-License-Identifier: Apache-2.0
#include <cmath>

#include "model/dynamics/two_level.hpp"
#include "model/quantity/constants.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::dynamics;
using constants::kPi;
using constants::kTwoPi;

namespace {

double from_ground(double rabi, double detuning, double decay, double dephasing, double length_s) {
  return population({rabi, detuning, decay, 0, dephasing}, {}, length_s);
}

/// Where a function falls through `level` between a and b.
template <class Function>
double crossing(const Function& f, double level, double a, double b) {
  for (int i = 0; i < 100; ++i) ((f(0.5 * (a + b)) > level) == (f(a) > level) ? a : b) = 0.5 * (a + b);
  return 0.5 * (a + b);
}

}  // namespace

// Source: I. I. Rabi, Phys. Rev. 51, 652 (1937), P = W^2/(W^2+D^2) sin^2(sqrt(W^2+D^2) t/2), worked out to nine digits.
TEST_CASE("generalised Rabi oscillations") {
  CHECK(from_ground(kTwoPi * 100e3, kTwoPi * 75e3, 0, 0, 4e-6) == Approx(0.64).margin(1e-13));
  CHECK(from_ground(kTwoPi * 10e3, kTwoPi * 10e3, 0, 0, 50e-6) == Approx(0.316563836).margin(5e-10));
  CHECK(from_ground(kTwoPi * 10e3, kTwoPi * 5e3, 0, 0, 50e-6) == Approx(0.772812970).margin(5e-10));
}

// Source: H. C. Torrey, Phys. Rev. 76, 1059 (1949), on resonance with radiative decay, L^2 = W^2 - G^2/16:
// rho_ee = W^2/(2 W^2 + G^2) (1 - exp(-3 G t/4) (cos L t + (3 G/4L) sin L t)), worked out to nine digits.
TEST_CASE("resonant drive with radiative decay") {
  CHECK(from_ground(0.1, 0, 1, 0, 10) == Approx(0.009689990).margin(5e-10));
  CHECK(from_ground(0.25, 0, 1, 0, 5) == Approx(0.049349484).margin(5e-10));  // critical damping
  CHECK(from_ground(1, 0, 1, 0, 1) == Approx(0.143610413).margin(5e-10));
  CHECK(from_ground(2, 0, 1, 0, 1) == Approx(0.456143487).margin(5e-10));
  CHECK(from_ground(5, 0, 1, 0, 0.5) == Approx(0.729065913).margin(5e-10));
}

// Source: Bloch equations with coherence decay G/2 + phi, integrated by SciPy to nine digits.
TEST_CASE("detuned drive with decay and dephasing") {
  CHECK(from_ground(1, 0.5, 0.1, 0, 3) == Approx(0.707777924).margin(5e-10));
  CHECK(from_ground(1, 1, 0.2, 0.1, 5) == Approx(0.172460241).margin(5e-10));
  CHECK(from_ground(5, 2, 1, 0.5, 2) == Approx(0.439467811).margin(5e-10));
  CHECK(from_ground(2, -3, 1, 0, 1.5) == Approx(0.069231427).margin(5e-10));
  CHECK(from_ground(1, 0, 0, 0.2, 4) == Approx(0.749162801).margin(5e-10));
  CHECK(from_ground(0.3, 0.7, 1, 0.05, 10) == Approx(0.029303211).margin(5e-10));
}

// Source: steady state of the optical Bloch equations, (s/2)/(1 + s + 4 D^2/G^2) with s = 2 W^2/G^2; full width at half
// maximum G sqrt(1 + s) (D. A. Steck, Quantum and Atom Optics, section 5.5; from memory). At 60/G what is left of the
// transient is below exp(-30).
TEST_CASE("steady state and power broadening") {
  const auto steady = [](double saturation, double detuning) {
    return from_ground(std::sqrt(0.5 * saturation), detuning, 1, 0, 60);
  };
  CHECK(steady(1, 0) == Approx(1.0 / 4).margin(1e-11));
  CHECK(steady(1, 0.5) == Approx(1.0 / 6).margin(1e-11));
  CHECK(steady(10, 1) == Approx(1.0 / 3).margin(1e-11));
  for (double rabi : {0.1, 1.0, 10.0}) {
    const auto line = [&](double detuning) { return from_ground(rabi, detuning, 1, 0, 100); };
    CHECK(2 * crossing(line, 0.5 * line(0), 0, 100) == Approx(std::sqrt(1 + 2 * rabi * rabi)).epsilon(1e-9));
  }
}

// Source: the Rabi line of a square pi pulse: full width at half maximum 0.798685355/t and first zero 0.866025404/t (Hz);
// first side lobe 0.116438 at D/W = 2.680111 (roots of the closed formula by SciPy).
TEST_CASE("the line of a square pi pulse") {
  const double length_s = 50e-6, rabi = kPi / length_s;
  const auto line = [&](double detuning) { return from_ground(rabi, detuning, 0, 0, length_s); };
  CHECK(2 * crossing(line, 0.5, 0, 1.5 * rabi) / kTwoPi * length_s == Approx(0.798685355).margin(5e-10));
  CHECK(line(kTwoPi * 0.866025404 / length_s) == Approx(0).margin(1e-15));
  CHECK(line(2.680111 * rabi) == Approx(0.116438).margin(5e-7));
  CHECK(line(2.679 * rabi) < line(2.680111 * rabi));
  CHECK(line(2.681 * rabi) < line(2.680111 * rabi));
}
