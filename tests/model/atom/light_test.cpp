// SPDX-License-Identifier: Apache-2.0
#include "model/atom/light.hpp"

#include <cmath>
#include <functional>

#include "model/atom/angular.hpp"
#include "model/quantity/constants.hpp"
#include "tests/model/atom/lines.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::atom;
using namespace halfturn::tests;
using constants::kDipoleAtomicUnit;

namespace {

Transition resolved(const char* name) {
  static const auto lines = all_lines();
  auto found = resolve(name, lines);
  INFO((found ? "" : found.error().message));
  REQUIRE(found);
  return *found;
}

/// Half a unit of the last printed digit, and a hair for the arithmetic.
auto printed(double value, double unit) { return Approx(value).epsilon(0.0).margin(0.5001 * unit); }

/// c epsilon_0 Gamma^2 hbar^2 / (4 d^2) in mW/cm^2 for a moment that is the given part of d_S.
double saturation_mw_cm2(Transition transition, double part) {
  transition.dipole_C_m = part * *transition.reduced_dipole_C_m;
  return saturation_intensity(transition).value() / 10.0;
}

}  // namespace

TEST_CASE("Rb-85 D2: Steck's table to every printed digit") {
  // Steck, "Rubidium 85 D Line Data", tables 3, 7 and 8 (read).
  const auto cycle = resolved("Rb85 D2 F=3 m=3 -> F'=4 m'=4 sigma+");
  CHECK(*cycle.linewidth_hz / 1e6 == printed(6.0666, 1e-4));
  CHECK(*cycle.reduced_dipole_C_m / kDipoleAtomicUnit == printed(4.22753, 1e-5));
  CHECK(*cycle.reduced_dipole_C_m * 1e29 == printed(3.58425, 1e-5));
  CHECK(*cycle.dipole_C_m / kDipoleAtomicUnit == printed(2.98931, 1e-5));
  CHECK(*cycle.dipole_C_m * 1e29 == printed(2.53444, 1e-5));
  CHECK(*cycle.dipole_sigma_C_m / kDipoleAtomicUnit == printed(0.00044, 1e-5));
  CHECK(saturation_intensity(cycle).value() / 10.0 == printed(1.66932, 1e-5));
  CHECK(two_level_saturation_intensity(cycle).value() / 10.0 == printed(1.66932, 1e-5));
  CHECK(*cycle.state_linewidth_hz == Approx(*cycle.linewidth_hz).epsilon(1e-14));  // closed
  const double isotropic = std::sqrt(hyperfine_strength(5, 1, 6, 3, 8) / 3.0);
  CHECK(isotropic * *cycle.reduced_dipole_C_m / kDipoleAtomicUnit == printed(1.95696, 1e-5));
  CHECK(saturation_mw_cm2(cycle, isotropic) == printed(3.8951, 1e-4));
  CHECK(*cycle.reduced_dipole_C_m / std::sqrt(3.0) / kDipoleAtomicUnit == printed(2.44076, 1e-5));
  CHECK(saturation_mw_cm2(cycle, 1.0 / std::sqrt(3.0)) == printed(2.50399, 1e-5));
}

TEST_CASE("Rb-85 D1: Steck's table to every printed digit") {
  // Steck, "Rubidium 85 D Line Data", tables 4, 7 and 8 (read).
  const auto line = resolved("Rb85 D1 F=3 m=3 -> F'=3 m'=3 pi");
  CHECK(*line.linewidth_hz / 1e6 == printed(5.7500, 1e-4));
  CHECK(*line.reduced_dipole_C_m / kDipoleAtomicUnit == printed(2.9931, 1e-4));
  // The sheet's lifetime, 27.679 ns, is rounded to 1.8e-5; the moment takes half of that and the saturation all of it.
  CHECK(*line.reduced_dipole_C_m / std::sqrt(3.0) / kDipoleAtomicUnit == Approx(1.72809).epsilon(0.9e-5).margin(0.5e-5));
  CHECK(saturation_mw_cm2(line, 1.0 / std::sqrt(3.0)) == Approx(4.4876).epsilon(1.8e-5).margin(0.5e-4));
}

TEST_CASE("Rb-87: Steck's numbers to every printed digit") {
  // Steck, "Rubidium 87 D Line Data" (as quoted).
  const auto cycle = resolved("Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+");
  CHECK(*cycle.reduced_dipole_C_m / kDipoleAtomicUnit == printed(4.22752, 1e-5));
  CHECK(*cycle.reduced_dipole_C_m * 1e29 == printed(3.58424, 1e-5));
  CHECK(*cycle.angular_factor == Approx(1.0 / std::sqrt(2.0)).epsilon(1e-15));
  CHECK(saturation_intensity(cycle).value() / 10.0 == printed(1.66933, 1e-5));
  CHECK(saturation_mw_cm2(cycle, std::sqrt(hyperfine_strength(3, 1, 4, 3, 6) / 3.0)) == printed(3.5771, 1e-4));
  CHECK(saturation_mw_cm2(cycle, 1.0 / std::sqrt(3.0)) == printed(2.50399, 1e-5));
  CHECK(*resolved("Rb87 D1 F=2 m=2 -> F'=2 m'=2 pi").reduced_dipole_C_m / kDipoleAtomicUnit == printed(2.9931, 1e-4));
}

TEST_CASE("Rb-87 D2 cycle: Rabi frequency at given intensities") {
  // Values computed by SciPy as Gamma sqrt(I / (2 Isat)) with Steck's lifetime and his Isat of 1.66933 mW/cm^2, whose last
  // digit leaves 1.5e-6 of the Rabi frequency open.
  const auto cycle = resolved("Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+");
  CHECK(light_from_intensity_w_m2(cycle, 10.0).value().rabi_hz / 1e6 == printed(3.32014, 1e-5));
  const double saturation_w_m2 = saturation_intensity(cycle).value();
  CHECK(light_from_intensity_w_m2(cycle, saturation_w_m2).value().rabi_hz / 1e6 == printed(4.289704, 1e-6));
  CHECK(light_from_intensity_w_m2(cycle, 16.6933).value().rabi_hz == Approx(4.28970449630408e6).epsilon(1.5e-6));
  CHECK(light_from_intensity_w_m2(cycle, 1000.0).value().rabi_hz == Approx(33.20139082684418e6).epsilon(1.5e-6));
  CHECK(light_from_saturation(cycle, 1.0).value().rabi_hz == Approx(*cycle.linewidth_hz / std::sqrt(2.0)).epsilon(1e-14));
}

TEST_CASE("the centre of a Gaussian beam") {
  // 2 P / (pi w^2) by SciPy: 1 mW in 100 um is 63661.977 W/m^2.
  CHECK(peak_intensity_w_m2(1e-3, 100e-6) == Approx(63661.97723675814).epsilon(1e-14));
  CHECK(power_of_intensity_w(63661.97723675814, 100e-6) == Approx(1e-3).epsilon(1e-14));
}

TEST_CASE("the Bloch-Siegert shift") {
  // Bloch & Siegert (1940): 1 MHz on a carrier of 10 MHz shifts by 25 kHz, 10 kHz on 1 MHz by 25 Hz.
  CHECK(bloch_siegert_hz(1e6, 10e6) == Approx(25e3).epsilon(1e-15));
  CHECK(bloch_siegert_hz(10e3, 1e6) == Approx(25.0).epsilon(1e-15));
}

TEST_CASE("saturation of lines with branching") {
  // Two-level forms 51.48 and 28.96 mW/cm^2 (computed from the quoted rates), not 45.07 and 16.49 of the partial width
  // alone.
  const auto ca_pi = resolved("Ca40+ 4S1/2 m=-1/2 -> 4P1/2 m'=-1/2 pi");
  const auto ba_sigma = resolved("Ba138+ 493 m=-1/2 -> m'=1/2 sigma+");
  CHECK(two_level_saturation_intensity(ca_pi).value() / 10.0 == printed(51.48, 0.01));
  CHECK(two_level_saturation_intensity(ba_sigma).value() / 10.0 == printed(28.96, 0.01));
  CHECK(saturation_intensity(ca_pi).value() == Approx(3.0 * two_level_saturation_intensity(ca_pi).value()).epsilon(1e-9));
  CHECK(saturation_intensity(ba_sigma).value() ==
        Approx(1.5 * two_level_saturation_intensity(ba_sigma).value()).epsilon(1e-9));
  CHECK(*ca_pi.linewidth_hz / 1e6 == printed(23.05, 0.01));
  CHECK(*ca_pi.partial_linewidth_hz / 1e6 == printed(21.57, 0.01));
  CHECK(*ca_pi.state_linewidth_hz == Approx(*ca_pi.partial_linewidth_hz / 3.0).epsilon(1e-14));
  // Hettrich et al. (2015): 2.8928(43) e a0 in Racah's normalisation.
  CHECK(std::sqrt(2.0) * *ca_pi.reduced_dipole_C_m / kDipoleAtomicUnit == Approx(2.8928).margin(0.0043));
}

TEST_CASE("a report is the same from whichever quantity it starts") {
  const auto transition = resolved("Sr88 1S0 -> 3P1 m=0 pi");
  const double waist_m = 45e-6;
  const auto base = light_from_rabi_hz(transition, 125340.0, waist_m).value();
  CHECK(base.field_v_m ==
        Approx(constants::kReducedPlanck * constants::kTwoPi * 125340.0 / *transition.dipole_C_m).epsilon(1e-14));
  const Result<LightReport> reports[] = {
      light_from_pi_time_s(transition, base.pi_time_s, waist_m), light_from_field_v_m(transition, base.field_v_m, waist_m),
      light_from_intensity_w_m2(transition, base.intensity_w_m2, waist_m),
      light_from_saturation(transition, *base.saturation, waist_m), light_from_power_w(transition, *base.power_w, waist_m)};
  for (const auto& report : reports) {
    REQUIRE(report);
    CHECK(report->rabi_hz == Approx(125340.0).epsilon(1e-13));
    CHECK(*report->power_w == Approx(*base.power_w).epsilon(1e-13));
    CHECK(report->bloch_siegert_hz == Approx(125340.0 * 125340.0 / 4.0 / 434.828994e12).epsilon(1e-12));
    CHECK(report->rabi_over_carrier == Approx(125340.0 / 434.828994e12).epsilon(1e-12));
  }
  CHECK(*base.saturation_intensity_w_m2 == Approx(saturation_intensity(transition).value()).epsilon(1e-13));
  CHECK_FALSE(light_from_rabi_hz(transition, 1e5).value().power_w);
}

TEST_CASE("Sr-88 689 nm has the moment of its rate") {
  // d_S = 0.15086 e a0 from A = 4.69e4 1/s (SciPy); J = 0 to J' = 1 takes 1/sqrt(3) of it for every polarisation.
  const auto transition = resolved("Sr88 1S0 -> 3P1 m=0 pi");
  CHECK(*transition.reduced_dipole_C_m / kDipoleAtomicUnit == Approx(0.15086).epsilon(5e-5));
  CHECK(*transition.dipole_C_m == Approx(*transition.reduced_dipole_C_m / std::sqrt(3.0)).epsilon(1e-14));
  CHECK(*transition.state_linewidth_hz == Approx(*transition.linewidth_hz).epsilon(1e-14));
  CHECK(transition.wavelength_m * 1e9 ==
        Approx(689.449098).epsilon(0.0).margin(1.3e-6));  // both printed to 1e-6 of their unit
}

TEST_CASE("light faults name what is wrong") {
  const auto quadrupole = resolved("Ca40+ 4S1/2 m=-1/2 -> 3D5/2 m'=-1/2");
  const auto forbidden = light_from_rabi_hz(quadrupole, 1e4);
  REQUIRE_FALSE(forbidden);
  CHECK(forbidden.error().code == "not_available");
  CHECK(forbidden.error().message.find("electric quadrupole") != std::string::npos);
  const auto line = resolved("Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+");
  for (const double wrong : {0.0, -1.0, std::nan(""), HUGE_VAL}) {
    CHECK(light_from_rabi_hz(line, wrong).error().code == "bad_value");
    CHECK(light_from_power_w(line, wrong, 1e-3).error().where == "power_w");
    CHECK(light_from_rabi_hz(line, 1e6, wrong).error().where == "waist_m");
  }
  auto without_width = line;
  without_width.linewidth_hz.reset();
  CHECK(light_from_saturation(without_width, 1.0).error().code == "not_available");
  CHECK(saturation_intensity(without_width).error().code == "not_available");
  CHECK_FALSE(light_from_rabi_hz(without_width, 1e6).value().saturation);
  CHECK(flux_from_rabi_hz(line, 1e4).error().code == "not_available");
}

TEST_CASE("flux density from a magnetic moment") {
  // hbar Omega = mu_B B: 1 MHz is 71.447 73 uT (mu_B/h = 13.996 244 917 GHz/T, CODATA 2022).
  Transition microwave;
  microwave.multipole = Multipole::magnetic_dipole;
  microwave.frequency_hz = 6834682610.904;
  microwave.magnetic_moment_J_T = constants::kBohrMagneton;
  const auto report = flux_from_rabi_hz(microwave, 1e6).value();
  CHECK(report.flux_density_t == Approx(1e6 / 13.996244917e9).epsilon(1e-8));
  CHECK(flux_from_flux_density_t(microwave, report.flux_density_t).value().rabi_hz == Approx(1e6).epsilon(1e-13));
  CHECK(flux_from_flux_density_t(microwave, -1.0).error().where == "flux_density_t");
}
