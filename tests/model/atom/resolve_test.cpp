// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <iterator>
#include <random>
#include <string>

#include "model/quantity/constants.hpp"
#include "tests/model/atom/lines.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::atom;
using namespace halfturn::tests;

namespace {

Transition resolved(const std::string& name) {
  auto found = resolve(name, all_lines());
  INFO(name << ": " << (found ? "" : found.error().message));
  REQUIRE(found);
  return *found;
}

Fault refused(const std::string& name) {
  auto found = resolve(name, all_lines());
  INFO(name);
  REQUIRE_FALSE(found);
  CHECK(found.error().where == "transition");
  return found.error();
}

bool says(const Fault& fault, const std::string& words) {
  INFO("message: " << fault.message);
  CHECK(fault.message.find(words) != std::string::npos);
  return fault.message.find(words) != std::string::npos;
}

}  // namespace

TEST_CASE("a name by label and by terms is the same transition") {
  const auto by_label = resolved("Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+");
  const auto by_terms = resolved("Rb87 5S1/2 F=2 m=2 -> 5P3/2 F'=3 m'=3 sigma+");
  CHECK(*by_label.dipole_C_m == *by_terms.dipole_C_m);
  CHECK(*by_label.lower.twice_F == 4);
  CHECK(*by_label.upper.twice_m == 6);
  CHECK(by_label.polarisation == Polarisation::sigma_plus);
  CHECK(by_label.name == "Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+");
  CHECK(resolved("  Rb87   D2 F=2  m=2 -> F'=3 m'=3 sigma+ ").name == by_label.name);
}

TEST_CASE("what only one value can have may be left out") {
  CHECK(*resolved("Rb87 D2 F=2 m=2 -> F'=3 sigma+").upper.twice_m == 6);
  CHECK(*resolved("Rb87 D2 F=2 -> F'=3 m'=3 sigma+").lower.twice_m == 4);
  CHECK(resolved("Rb87 D2 F=2 m=-2 -> F'=3 m'=-3").polarisation == Polarisation::sigma_minus);
  CHECK(*resolved("Yb171+ 369 F=0 -> F'=1 pi").upper.twice_m == 0);
  CHECK(*resolved("Yb171+ 369nm F=1 m=-1 -> F'=0").lower.twice_m == -2);
  CHECK(*resolved("Yb171+ 369 nm F=1 -> F'=0 sigma+").lower.twice_m == -2);
  CHECK(*resolved("Sr88 689 -> pi").upper.twice_m == 0);
  CHECK(*resolved("Ca40+ 4S1/2 m=-1/2 -> 4P1/2 m'=-1/2 pi").lower.twice_m == -1);
  CHECK(*resolved("Ca40+ 397 m=1/2 -> sigma-").upper.twice_m == -1);
}

TEST_CASE("an m without its prime behind the arrow is taken only where it is clear") {
  const auto clock = resolved("Sr88 1S0 -> 3P1 m=0 pi");
  CHECK(*clock.lower.twice_m == 0);
  CHECK(*clock.upper.twice_m == 0);
  CHECK(*resolved("Sr88 1S0 -> 3P1 m=1 sigma+").upper.twice_m == 2);
  CHECK(*resolved("Ca40+ 4S1/2 -> 4P1/2 m=1/2 pi").lower.twice_m == 1);  // pi: m' = m
  says(refused("Ca40+ 4S1/2 -> 4P1/2 m=1/2 sigma+"), "write m'=");
  says(refused("Rb87 5S1/2 -> 5P3/2 F=2 m=2 sigma+"), "write F'=");
  says(refused("Rb87 D2 F=2 m=2 -> F'=3 m=3 m'=3 sigma+"), "m and m' both");
}

TEST_CASE("a missing part is named with what it can be") {
  auto fault = refused("Rb87 D2 F=2 -> F'=3 sigma+");
  CHECK(fault.code == "missing_field");
  says(fault, "m is missing; it is one of -2 -1 0 1 2");
  says(fault, "'Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+'");
  says(refused("Rb87 D2 m=2 -> F'=3 sigma+"), "F is missing; 5S1/2 has F = 1 2");
  says(refused("Rb87 D2 F=2 m=2 -> sigma+"), "F' is missing; 5P3/2 has F' = 0 1 2 3");
  says(refused("Rb87 D2 F=2 m=2 -> F'=3"), "the polarisation is missing");
}

// `Rb87` alone was answered with three names of Sr88, which are shorter and so fewer edits away.
TEST_CASE("an incomplete name comes with names that begin alike") {
  const auto message = refused("Rb87").message;
  CHECK(message.find("near names are 'Rb87 ") != std::string::npos);
  CHECK(message.find("Sr88") == std::string::npos);
  says(refused("Rb87 D"), "near names are 'Rb87 D");
  says(refused("Rb8"), "near names are 'Rb8");
}

TEST_CASE("an unknown name comes with near ones") {
  says(refused("Rb87 D3 F=2 m=2 -> F'=3 m'=3 sigma+"), "no line D3 of Rb87, but D2 or 5S1/2 -> 5P3/2");
  says(refused("Rb86 D2 F=2 m=2 -> F'=3 m'=3 sigma+"), "near names are 'Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+'");
  says(refused("Sr88 1S0 -> 3P2 m=0 pi"), "'Sr88 1S0 -> 3P1 m=0 pi'");
  for (const auto* wrong : {"", "   ", "Rb87", "Rb87 D2", "->", "Rb87 D2 F=2 m=2 F'=3 m'=3 sigma+", "Rb87 -> 5P3/2"}) {
    INFO(wrong);
    CHECK_FALSE(resolve(wrong, all_lines()));
  }
  CHECK_FALSE(resolve("Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+", {}));
  says(refused(std::string(100000, 'x')), "expected at most 200");
}

TEST_CASE("malformed names say where") {
  says(refused("Rb87 D2 F=2 m=2 -> -> F'=3 m'=3 sigma+"), "two arrows");
  says(refused("Rb87 D2 F=2 F=1 m=2 -> F'=3 m'=3 sigma+"), "F is given twice");
  says(refused("Rb87 D2 F=2 m=two -> F'=3 m'=3 sigma+"), "after m=");
  says(refused("Rb87 D2 F=2 mF=2 -> F'=3 m'=3 sigma+"), "expected F=, m=, F'= or m'=");
  says(refused("Rb87 D2 F'=3 F=2 m=2 -> m'=3 sigma+"), "before the arrow");
  says(refused("Rb87 D2 sigma+ F=2 m=2 -> F'=3 m'=3"), "belongs at the end");
  says(refused("Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+ pi"), "two polarisations");
  says(refused("Rb87 D2 F=2 m=2 -> 5P3/2 F'=3 m'=3 sigma"), "was not understood");
  says(refused("Ca40+ 397 F=3/2 m=1/2 -> m'=1/2 pi"), "no hyperfine structure");
}

TEST_CASE("states that do not exist are refused with those that do") {
  says(refused("Rb87 D2 F=3 m=2 -> F'=3 m'=3 sigma+"), "F = 1 2");
  says(refused("Rb87 D2 F=2 m=3 -> F'=3 m'=4 sigma+"), "m = -2 -1 0 1 2");
  says(refused("Rb87 D2 F=2 m=2 -> F'=2 sigma+"), "m' = -2 -1 0 1 2");
  says(refused("Rb87 D2 F=2 m=1/2 -> F'=3 m'=1/2 pi"), "m = -2 -1 0 1 2");
}

TEST_CASE("forbidden pairs of states name their rule") {
  // Foot, "Atomic Physics" (2005), table 5.1 and section 6.1 (from memory).
  says(refused("Rb87 D2 F=1 m=1 -> F'=3 m'=2 sigma+"), "F may change by 0 or 1 only");
  says(refused("Rb87 D2 F=2 m=0 -> F'=2 m'=0 pi"), "m = 0 does not go to m' = 0 where F' = F");
  says(refused("Yb171+ 369 F=0 m=0 -> F'=0 m'=0 pi"), "F = 0 does not go to F' = 0");
  says(refused("Rb87 D2 F=2 m=2 -> F'=3 m'=2 sigma+"), "sigma+ polarisation changes m by +1");
  says(refused("Rb87 D2 F=2 m=0 -> F'=3 m'=2"), "m may change by 0 or 1 only");
}

TEST_CASE("another kind of transition needs no polarisation and has no electric moment") {
  const auto quadrupole = resolved("Ca40+ 4S1/2 m=-1/2 -> 3D5/2 m'=-5/2");
  CHECK(quadrupole.multipole == Multipole::electric_quadrupole);
  CHECK_FALSE(quadrupole.dipole_C_m);
  CHECK(*quadrupole.linewidth_hz == Approx(1.0 / (2.0 * 3.14159265358979 * 1.1649)).epsilon(1e-12));
  CHECK(resolved("Ca40+ 729 ->").frequency_hz == 411042129776400.4);
}

TEST_CASE("hyperfine transitions of a ground level have the electron's moment") {
  // Rb-87 clock states: mu = (g_J - g_I) mu_B / 2 with g_J = 2.002 331 13, g_I = -0.000 995 14 (Steck, "Rubidium 87 D Line
  // Data", from memory). Stretched F=1 m=1 to F'=2 m'=2: <1 1|S_-|2 2> over sqrt(2) = sqrt(3/8) by Clebsch-Gordan.
  const auto clock = resolved("Rb87 hyperfine F=1 m=0 -> F'=2 m'=0");
  CHECK(clock.polarisation == Polarisation::pi);
  CHECK(*clock.magnetic_moment_J_T / constants::kBohrMagneton == Approx(0.5 * (2.00233113 + 0.00099514)).epsilon(1e-3));
  const auto stretched = resolved("Rb87 hyperfine F=1 m=1 -> F'=2 m'=2 sigma+");
  CHECK(*stretched.magnetic_moment_J_T / constants::kBohrMagneton ==
        Approx(2.00233113 * std::sqrt(3.0 / 8.0)).epsilon(1e-3));
  CHECK_FALSE(clock.dipole_C_m);
  CHECK_FALSE(resolved("Rb87 hyperfine ->").magnetic_moment_J_T);
  says(refused("Rb87 hyperfine F=2 m=0 -> F'=2 m'=0"),
       "a magnetic-dipole transition is forbidden here: m = 0 does not go to m' = 0");
  says(refused("Rb87 hyperfine F=1 m=-1 -> F'=2 m'=1"), "m may change by 0 or 1 only");
}

TEST_CASE("every recommended name resolves and can stand in a configuration") {
  const auto lines = all_lines();
  const auto listed = names(lines);
  CHECK(listed.size() == lines.size());
  for (const auto& name : listed) {
    CHECK(name.find_first_of(",:#") == std::string::npos);
    CHECK(name.find("  ") == std::string::npos);
    CHECK(resolve(name, lines));
  }
  for (const auto& line : lines) {
    const auto checked = check_line(line);
    INFO((checked ? "" : checked.error().message));
    CHECK(checked);
  }
}

TEST_CASE("a line that cannot be used is refused") {
  auto comma = rb87_d2();
  comma.recommended.push_back("Rb87, D2");
  CHECK(check_line(comma).error().message.find("without comma") != std::string::npos);
  auto unlisted = rb87_d2();
  unlisted.recommended.clear();
  CHECK(check_line(unlisted).error().where == "transitions.recommended");
  auto other = rb87_d2();
  other.recommended = {"Rb87 D1 F=2 m=2 -> F'=2 m'=2 pi"};
  CHECK_FALSE(check_line(other));
  auto even = rb87_d2();
  even.upper.parity = 1;
  CHECK(check_line(even).error().message.find("parity must change") != std::string::npos);
  auto silent = rb87_d2();
  silent.upper.parity.reset();
  CHECK(check_line(silent).error().code == "missing_field");
  auto clock = sr88_689();
  clock.upper = level("3P0", 0, -1);
  CHECK(check_line(clock).error().message.find("J = 0 does not go to J' = 0") != std::string::npos);
}

TEST_CASE("whatever is typed, a name that resolves has a sound moment and any other a full sentence") {
  const std::string words[] = {"Rb87",   "Yb171+", "Sr88",   "Ca40+", "D2",     "369",  "689",   "nm",    "->",
                               "F=2",    "F=0",    "m=2",    "m=0",   "m=-1/2", "F'=3", "F'=1",  "m'=3",  "m'=0",
                               "m'=1/2", "sigma+", "sigma-", "pi",    "1S0",    "3P1",  "5S1/2", "5P3/2", "hyperfine",
                               "=",      "m=",     "F'=x",   "m=99",  "\xff",   "'"};
  const auto lines = all_lines();
  std::mt19937 random(5771);
  std::uniform_int_distribution<std::size_t> pick(0, std::size(words) - 1), length(0, 9);
  int resolved_names = 0;
  for (int i = 0; i < 40000; ++i) {
    std::string name;
    if (i % 2 == 0) name = i % 4 == 0 ? "Sr88 689 -> " : "Rb87 D2 F=2 m=2 -> ";
    for (std::size_t count = length(random) / (i % 2 == 0 ? 3 : 1); count > 0; --count) name += words[pick(random)] + " ";
    const auto found = resolve(name, lines);
    INFO(name);
    if (!found) {
      REQUIRE(found.error().message.size() > 10);
      continue;
    }
    ++resolved_names;
    if (found->multipole != Multipole::electric_dipole) continue;
    REQUIRE(*found->dipole_C_m > 0.0);
    REQUIRE(*found->state_linewidth_hz <= *found->partial_linewidth_hz * (1.0 + 1e-12));
    REQUIRE(*found->upper.twice_m - *found->lower.twice_m == 2 * static_cast<int>(*found->polarisation));
  }
  CHECK(resolved_names > 100);
}
