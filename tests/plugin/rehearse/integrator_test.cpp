// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/integrator.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <vector>
#include <complex>

#include "model/quantity/constants.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::rehearse;
using halfturn::constants::kPi;
using halfturn::constants::kTwoPi;

namespace {

double square(const Rates& rates, double duration_s) { return after_square_pulse(rates, duration_s).excited; }
double stepped(const Rates& rates, double duration_s) {
  return after_shaped_pulse(rates, [](double) { return 1.0; }, duration_s).excited;
}

/// Torrey, Phys. Rev. 76, 1059 (1949): resonance, radiative decay, from the ground state.
double torrey(double rabi, double decay, double time) {
  const std::complex<double> beat = std::sqrt(std::complex<double>(rabi * rabi - decay * decay / 16));
  const auto bracket = std::cos(beat * time) + 3 * decay / 4 / beat * std::sin(beat * time);
  return rabi * rabi / (2 * rabi * rabi + decay * decay) * (1.0 - std::exp(-3 * decay * time / 4) * bracket).real();
}

}  // namespace

TEST_CASE("A square pulse without damping follows Rabi's formula") {
  // Rabi, Phys. Rev. 51, 652 (1937). 100 kHz, 75 kHz off, 4 us: 0.64 exactly.
  const Rates exact{kTwoPi * 100e3, kTwoPi * 75e3};
  CHECK(square(exact, 4e-6) == Approx(0.64).margin(1e-12));
  CHECK(stepped(exact, 4e-6) == Approx(0.64).margin(1e-9));
  CHECK(undamped_population(exact.rabi, exact.detuning, 4e-6) == Approx(0.64).margin(1e-14));
  // Computed with QuTiP: Omega = Delta = 2 pi 10 kHz, and Delta = 2 pi 5 kHz, 50 us.
  CHECK(square({kTwoPi * 10e3, kTwoPi * 10e3}, 50e-6) == Approx(0.316563836).margin(1e-9));
  CHECK(square({kTwoPi * 10e3, kTwoPi * 5e3}, 50e-6) == Approx(0.772812970).margin(1e-9));
  for (const double time : {0.0, 0.3, 2.0, 20.0, 90.0}) {
    for (const double detuning : {-2.0, 0.0, 0.7}) {
      CHECK(square({1.3, detuning}, time) == Approx(undamped_population(1.3, detuning, time)).margin(1e-11));
    }
  }
}

TEST_CASE("Resonance with decay follows Torrey's closed form") {
  // Values: Torrey's formula evaluated with SciPy, equal to QuTiP to 1e-10; (0.25, 5) is critical damping.
  struct Case { double rabi, time, excited; };
  for (const Case& c : {Case{0.1, 10, 0.009689990}, Case{0.25, 5, 0.049349484}, Case{1, 1, 0.143610413}, Case{2, 1, 0.456143487},
                        Case{5, 0.5, 0.729065913}}) {
    CHECK(square({c.rabi, 0, 1}, c.time) == Approx(c.excited).margin(1e-9));
    CHECK(stepped({c.rabi, 0, 1}, c.time) == Approx(c.excited).margin(1e-9));
  }
  for (const double rabi : {0.05, 0.249, 0.251, 3.0, 25.0}) {
    for (const double time : {0.01, 1.0, 10.0}) CHECK(square({rabi, 0, 1}, time) == Approx(torrey(rabi, 1, time)).margin(1e-11));
  }
}

TEST_CASE("Detuned, decaying and dephasing atoms agree with a master equation solved elsewhere") {
  // Computed with SciPy and QuTiP: (Omega, Delta, Gamma, gamma_phi, t).
  struct Case { Rates rates; double time, excited; };
  for (const Case& c : {Case{{1, 0.5, 0.1, 0, 0}, 3, 0.707777924}, Case{{1, 1, 0.2, 0, 0.1}, 5, 0.172460241},
                        Case{{5, 2, 1, 0, 0.5}, 2, 0.439467811}, Case{{2, -3, 1, 0, 0}, 1.5, 0.069231427},
                        Case{{1, 0, 0, 0, 0.2}, 4, 0.749162801}, Case{{0.3, 0.7, 1, 0, 0.05}, 10, 0.029303211}}) {
    CHECK(square(c.rates, c.time) == Approx(c.excited).margin(1e-9));
    CHECK(stepped(c.rates, c.time) == Approx(c.excited).margin(1e-9));
  }
}

TEST_CASE("The steady state is that of a saturated two-level atom") {
  // s0/2 / (1 + s0 + 4 Delta^2/Gamma^2), s0 = 2 Omega^2/Gamma^2 (Steck, Quantum and Atom Optics): 1/4, 1/6, 1/3.
  const auto steady = [](double saturation, double detuning) { return square({std::sqrt(saturation / 2), detuning, 1}, 60); };
  CHECK(steady(1, 0) == Approx(1.0 / 4).margin(1e-10));
  CHECK(steady(1, 0.5) == Approx(1.0 / 6).margin(1e-10));
  CHECK(steady(10, 1) == Approx(1.0 / 3).margin(1e-10));
}

TEST_CASE("Without a drive, populations only decay, into g and out of the pair by their rates") {
  // Exponential decay law; the branching is the ratio of the partial rates.
  const Populations end = after_square_pulse({0, 5, 0.3, 0.1, 0}, 2, 1);
  CHECK(end.excited == Approx(std::exp(-0.8)).margin(1e-12));
  CHECK(end.ground == Approx(0.75 * (1 - std::exp(-0.8))).margin(1e-12));
  const Populations impure = after_square_pulse({0, 0, 0, 0, 0}, 2, 0.03);
  CHECK(impure.excited == Approx(0.03).margin(1e-15));
  CHECK(after_square_pulse({3, 1, 1, 1, 1}, -1).ground == 1.0);
}

TEST_CASE("Pulses in even steps end where single ones do") {
  const Rates rates{4.1, -1.7, 0.6, 0.4, 0.25};
  std::vector<double> excited(200), one(1);
  after_square_pulses(rates, 0.07, 0.03, excited);
  for (std::size_t i = 0; i < excited.size(); ++i)
    CHECK(excited[i] == Approx(stepped(rates, 0.07 + 0.03 * static_cast<double>(i))).margin(1e-9));
  after_square_pulses(rates, -0.5, 0, one);
  CHECK(one[0] == 0.0);
}

TEST_CASE("The two ways of integrating agree with every rate at work, from either level") {
  const Rates rates{4.1, -1.7, 0.6, 0.4, 0.25};
  for (const double start : {0.0, 0.02, 1.0}) {
    for (const double time : {0.2, 1.1, 6.0}) {
      const auto a = after_square_pulse(rates, time, start);
      const auto b = after_shaped_pulse(rates, [](double) { return 1.0; }, time, start);
      CHECK(a.excited == Approx(b.excited).margin(1e-9));
      CHECK(a.ground == Approx(b.ground).margin(1e-9));
    }
  }
}

TEST_CASE("On resonance without damping only the area of a shaped pulse counts") {
  // P = sin^2(area/2): McCall and Hahn, Phys. Rev. 183, 457 (1969), area theorem of the single atom.
  const auto raised_cosine = [](double t) { return 0.5 - 0.5 * std::cos(kTwoPi * t); };
  const double area = 0.5 * 11.0;
  CHECK(after_shaped_pulse({11.0}, raised_cosine, 1).excited == Approx(std::pow(std::sin(area / 2), 2)).margin(1e-9));
  // Square with linear edges of 0.1: full width at half amplitude 0.9.
  const auto edged = [](double t) { return std::min({t / 0.1, 1.0, (1 - t) / 0.1}); };
  CHECK(after_shaped_pulse({kPi / 0.9}, edged, 1).excited == Approx(1).margin(1e-9));
}

TEST_CASE("A shaped pulse off resonance follows Rosen and Zener") {
  // Rosen and Zener, Phys. Rev. 40, 502 (1932): hyperbolic secant, P = sin^2(area/2) sech^2(pi Delta T/2). The tails beyond
  // 18 T hold an area of 6e-8 rad.
  const auto secant = [](double t) { return 1 / std::cosh(t - 18); };
  for (const double detuning : {0.0, 0.3, -1.1}) {
    for (const double rabi : {0.4, 1.0, 1.7}) {
      const double wanted = std::pow(std::sin(rabi * kPi / 2) / std::cosh(kPi * detuning / 2), 2);
      CHECK(after_shaped_pulse({rabi, detuning}, secant, 36).excited == Approx(wanted).margin(1e-7));
    }
  }
}
