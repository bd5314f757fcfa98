// SPDX-License-Identifier: Apache-2.0
// Slips seen in circulated tables; each must be refused, and the right number beside it taken.
#include <cmath>
#include <string>

#include "tests/model/atom/lines.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::atom;
using namespace halfturn::tests;

namespace {

Quoted measured(double value, double sigma) { return Quoted{value, sigma, "test"}; }

Quoted computed(double value, double sigma) { return Quoted{value, sigma, "test", Status::read, true}; }

void takes(const CatalogueLine& line) {
  const auto checked = check_consistency(line);
  INFO((checked ? "" : checked.error().message));
  CHECK(checked);
}

void refuses(const CatalogueLine& line, const std::string& field, const std::string& words) {
  const auto checked = check_consistency(line);
  REQUIRE_FALSE(checked);
  INFO("message: " << checked.error().message);
  CHECK(checked.error().where == "transitions." + field);
  CHECK(checked.error().message.find(words) != std::string::npos);
}

CatalogueLine sr_422() {
  auto made = line("Sr88+", "422", 0, level("5S1/2", 1, 1), level("5P1/2", 1, -1));
  made.wavelength_m = measured(421.671140e-9, 1e-13);  // NIST, 421.5524 nm in air converted with Peck & Reeder (1972)
  return made;
}

CatalogueLine cs_d2() {
  auto made = line("Cs133", "D2", 7, level("6S1/2", 1, 1), level("6P3/2", 3, -1));
  made.wavelength_m = measured(852.34727582e-9, 2.7e-16);  // Steck, "Cesium D Line Data", newer revision (as quoted)
  made.lifetime_s = measured(30.405e-9, 7.7e-11);
  return made;
}

}  // namespace

TEST_CASE("Sr+ 422 nm with c over the wavelength in air") {
  auto line = sr_422();
  line.frequency_hz = measured(710.962714e12, 2e8);
  takes(line);
  line.frequency_hz = measured(711.16297e12, 2e8);  // circulated
  refuses(line, "frequency_hz", "c over the wavelength in air");
  line.frequency_hz = measured(710.962714e12, 2e8);
  line.wavelength_m = measured(421.5524e-9, 1e-13);
  refuses(line, "frequency_hz", "wavelength looks like the one in air");
}

TEST_CASE("Cs D2 with its new dipole beside its old lifetime") {
  auto line = cs_d2();
  line.reduced_dipole_ea0 = computed(4.4837, 0.0057);
  line.linewidth_hz = computed(5.234e6, 1.3e4);
  takes(line);
  line.linewidth_hz.reset();
  line.lifetime_s = measured(30.473e-9, 3.9e-11);
  refuses(line, "reduced_dipole_ea0", "found 4.48370");
}

TEST_CASE("Rb-87 D2 with a saturation intensity that lacks pi") {
  auto line = rb87_d2();
  line.saturation_w_m2 = computed(16.6933, 0.0049);
  takes(line);
  line.saturation_w_m2 = computed(5.3136, 0.0016);
  refuses(line, "saturation_w_m2", "h nu Gamma / (3 lambda^2)");
}

TEST_CASE("Rb-87 D1 with the saturation intensity of D2") {
  auto line = rb87_d1();
  line.saturation_w_m2 = measured(16.69, 0.02);
  refuses(line, "saturation_w_m2", "found 16.69");
}

TEST_CASE("Ca+ 397 nm with its partial width for the total") {
  auto line = ca_397();
  line.linewidth_hz = measured(23.05e6, 9e4);
  line.partial_linewidth_hz = measured(21.57e6, 8e4);  // Hettrich et al. (2015)
  line.reduced_dipole_ea0 = measured(2.8928 / std::sqrt(2.0), 0.0030);
  takes(line);
  line.linewidth_hz = measured(21.57e6, 8e4);
  refuses(line, "linewidth_hz", "looks like the partial width");
  line.linewidth_hz.reset();
  line.partial_linewidth_hz = measured(23.05e6, 9e4);
  refuses(line, "partial_linewidth_hz", "looks like the total width");
}

TEST_CASE("saturation of a line with branching goes with the total squared over the partial width") {
  auto line = ca_397();
  line.saturation_w_m2 = measured(514.8, 2.0);
  takes(line);
  line.saturation_w_m2 = measured(450.7, 2.0);
  refuses(line, "saturation_w_m2", "partial width alone");
  line.saturation_w_m2 = measured(481.7, 2.0);
  refuses(line, "saturation_w_m2", "total width alone");
}

TEST_CASE("a moment in Racah's normalisation") {
  auto line = ca_397();
  line.reduced_dipole_ea0 = measured(2.8928, 0.0043);
  refuses(line, "reduced_dipole_ea0", "Racah");
}

TEST_CASE("an angular rate given for a linewidth") {
  auto line = rb87_d2();
  line.linewidth_hz = measured(38.117e6, 1.1e4);
  refuses(line, "linewidth_hz", "2 pi");
}

TEST_CASE("a partial decay larger than the total") {
  auto line = ba_493();
  takes(line);
  line.linewidth_hz = measured(12.0e6, 2e4);
  refuses(line, "partial_linewidth_hz", "more than the total");
}

TEST_CASE("numbers that are none") {
  for (const double wrong : {0.0, -1.0, std::nan(""), HUGE_VAL}) {
    auto line = rb87_d2();
    line.lifetime_s = measured(wrong, 0.0);
    refuses(line, "lifetime_s", "above 0");
  }
  auto uncertain = rb87_d2();
  uncertain.lifetime_s = measured(26e-9, 30e-9);
  refuses(uncertain, "lifetime_s", "sigma");
  auto branching = ca_397();
  branching.branching = measured(1.2, 0.1);
  refuses(branching, "branching", "at most 1");
  auto nowhere = rb87_d2();
  nowhere.wavelength_m.reset();
  CHECK(check_consistency(nowhere).error().code == "missing_field");
}

TEST_CASE("a number computed from the lifetime does not stand before it") {
  // Once the rounded moment of Steck's sheet was taken for the width: 5.749926 instead of 5.750027 MHz.
  auto line = rb85_d1();
  line.reduced_dipole_ea0 = computed(2.9931, 0.0014);
  takes(line);
  CHECK(numbers_of(line).value().partial_linewidth_hz->value == numbers_of(rb85_d1()).value().partial_linewidth_hz->value);
}

TEST_CASE("a line's numbers come from what is stated") {
  auto from_dipole = rb87_d2();
  from_dipole.lifetime_s.reset();
  from_dipole.reduced_dipole_ea0 = measured(4.22752, 0.00062);
  const auto numbers = numbers_of(from_dipole);
  REQUIRE(numbers);
  CHECK(numbers->partial_linewidth_hz->value / 1e6 == Approx(6.0666).margin(1e-4));  // Steck: 6.0666(18) MHz
  CHECK(numbers->partial_linewidth_hz->sigma / 1e6 == Approx(0.0018).margin(1e-4));
  CHECK_FALSE(numbers->linewidth_hz);
  // Ba+ 493 nm: d_S = 2.37796 e a0 from the quoted rates (SciPy).
  CHECK(1e29 * numbers_of(ba_493()).value().reduced_dipole_C_m->value == Approx(2.01612).epsilon(5e-6));
}
