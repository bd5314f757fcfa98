// SPDX-License-Identifier: Apache-2.0
#include "model/atom/angular.hpp"

#include <cmath>
#include <fstream>
#include <sstream>
#include <string>
#include <vector>

#include "model/atom/dipole.hpp"
#include "model/quantity/constants.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::atom;

namespace {

double signed_square(double value) { return value * std::abs(value); }

/// `7/72`, `-1`, `0` as a number.
double ratio(const std::string& text) {
  const auto slash = text.find('/');
  if (slash == std::string::npos) return std::stod(text);
  return std::stod(text.substr(0, slash)) / std::stod(text.substr(slash + 1));
}

int doubled(const std::string& text) {
  const auto value = read_half(text, "file");
  REQUIRE(value);
  return *value;
}

std::vector<std::vector<std::string>> rows_of(const std::string& path) {
  std::ifstream file(path);
  REQUIRE(file);
  std::vector<std::vector<std::string>> rows;
  std::string text;
  std::getline(file, text);  // header
  while (std::getline(file, text)) {
    if (!text.empty() && text.back() == '\r') text.pop_back();
    std::vector<std::string> row;
    std::stringstream cells(text);
    for (std::string cell; std::getline(cells, cell, ',');) row.push_back(cell);
    if (!row.empty()) rows.push_back(row);
  }
  return rows;
}

struct Table {
  const char* file;
  int twice_I;
  std::size_t elements, strengths;
};

// Every D1 and D2 element for the nuclear spins of the alkalis: exact squares by SymPy, equal to the tables of Steck's
// sheets.
const Table kTables[] = {{"Li6", 2, 64, 9}, {"Rb87_Na23_K39_Li7", 3, 94, 10}, {"Rb85", 5, 154, 10}, {"Cs133", 7, 214, 10}};

}  // namespace

TEST_CASE("single 3j and 6j symbols with their exact values") {
  // Exact values by SymPy; the first four also in Edmonds, "Angular Momentum in Quantum Mechanics" (1957), tables 2 and 5.
  CHECK(wigner_3j(1, 2, 3, 1, 0, -1) == Approx(1.0 / std::sqrt(6.0)).epsilon(1e-15));
  CHECK(wigner_3j(4, 2, 2, 0, 0, 0) == Approx(std::sqrt(2.0 / 15.0)).epsilon(1e-15));
  CHECK(wigner_6j(2, 2, 2, 2, 2, 2) == Approx(1.0 / 6.0).epsilon(1e-15));
  CHECK(wigner_6j(0, 2, 2, 3, 1, 1) == Approx(-1.0 / std::sqrt(6.0)).epsilon(1e-15));
  CHECK(wigner_3j(0, 0, 0, 0, 0, 0) == 1.0);
}

TEST_CASE("symbols of the largest spins keep their accuracy") {
  // Exact values by SymPy, printed to 20 digits.
  const auto close = [](double found, double exact) { return std::abs(found - exact) < 1e-15; };
  CHECK(close(wigner_3j(20, 20, 20, 0, 0, 0), -0.057688538682562716420));
  CHECK(close(wigner_3j(20, 18, 16, 4, -10, 6), -0.060378994765803877587));
  CHECK(close(wigner_3j(19, 17, 20, 1, -3, 2), -0.029139510088384717750));
  CHECK(close(wigner_3j(20, 20, 2, 20, -18, -2), -0.065795169495976898838));
  CHECK(close(wigner_6j(20, 20, 20, 20, 20, 20), -0.0029191867806092103112));
  CHECK(close(wigner_6j(20, 18, 16, 14, 12, 18), 0.019561198269046944020));
  CHECK(close(wigner_6j(19, 17, 18, 15, 17, 16), -0.016152169187363071084));
}

TEST_CASE("symbols vanish where a rule says so and are not a number beyond their range") {
  CHECK(wigner_3j(2, 2, 6, 0, 0, 0) == 0.0);   // triangle
  CHECK(wigner_3j(2, 2, 2, 0, 0, 0) == 0.0);   // odd sum of whole spins
  CHECK(wigner_3j(2, 2, 2, 2, 2, -2) == 0.0);  // projections do not add up to 0
  CHECK(wigner_3j(2, 2, 2, 1, 1, -2) == 0.0);  // half-integer projection of a whole spin
  CHECK(wigner_3j(1, 1, 1, 1, -1, 0) == 0.0);  // sum of spins not whole
  CHECK(wigner_6j(2, 2, 6, 2, 2, 2) == 0.0);
  CHECK(std::isnan(wigner_3j(30, 30, 0, 2, -2, 0)));
  CHECK(std::isnan(wigner_6j(30, 30, 0, 30, 30, 2)));
}

TEST_CASE("the symbols are orthogonal up to the largest spin") {
  // Edmonds (1957), equation 3.7.8: the sum over m1 and m2 of (2 j3 + 1) 3j^2 is 1.
  for (const int j3 : {0, 2, 10, 20}) {
    double sum = 0.0;
    for (int m = -20; m <= 20; m += 2) sum += (j3 + 1.0) * std::pow(wigner_3j(20, 20, j3, m, -m, 0), 2);
    CHECK(sum == Approx(1.0).epsilon(1e-14));
  }
}

TEST_CASE("Rb-87 D2 elements of Steck's tables") {
  // Steck, "Rubidium 87 D Line Data", tables of D2 dipole matrix elements (sigma+ and pi), as squares.
  const double cycle[] = {1.0 / 30, 1.0 / 10, 1.0 / 5, 1.0 / 3, 1.0 / 2};
  const double pi_light[] = {-1.0 / 6, -4.0 / 15, -3.0 / 10, -4.0 / 15, -1.0 / 6};
  for (int i = 0; i < 5; ++i) {
    const int twice_m = 2 * (i - 2);
    CHECK(signed_square(hyperfine_factor(3, 1, 4, twice_m, 3, 6, twice_m + 2)) == Approx(cycle[i]).epsilon(1e-14));
    CHECK(signed_square(hyperfine_factor(3, 1, 4, twice_m, 3, 6, twice_m)) == Approx(pi_light[i]).epsilon(1e-14));
  }
  const double same_f[] = {1.0 / 12, 1.0 / 8, 1.0 / 8, 1.0 / 12};
  for (int i = 0; i < 4; ++i) {
    const int twice_m = 2 * (i - 2);
    CHECK(std::pow(hyperfine_factor(3, 1, 4, twice_m, 3, 4, twice_m + 2), 2) == Approx(same_f[i]).epsilon(1e-14));
  }
  CHECK(std::pow(hyperfine_factor(3, 1, 2, 2, 3, 4, 4), 2) == Approx(1.0 / 4).epsilon(1e-14));
}

TEST_CASE("elements without hyperfine structure") {
  // Common textbook values: J = 1/2 to 1/2 is 1/sqrt(3) for pi and sqrt(2/3) for sigma; J = 0 to 1 is the whole strength.
  CHECK(std::abs(hyperfine_factor(0, 1, 1, -1, 1, 1, -1)) == Approx(1.0 / std::sqrt(3.0)).epsilon(1e-15));
  CHECK(std::abs(hyperfine_factor(0, 1, 1, -1, 1, 1, 1)) == Approx(std::sqrt(2.0 / 3.0)).epsilon(1e-15));
  CHECK(std::abs(hyperfine_factor(0, 0, 0, 0, 2, 2, 0)) == Approx(1.0 / std::sqrt(3.0)).epsilon(1e-15));
  CHECK(std::abs(hyperfine_factor(0, 0, 0, 0, 2, 2, 2)) == Approx(1.0 / std::sqrt(3.0)).epsilon(1e-15));
  CHECK(hyperfine_factor(0, 1, 1, -1, 3, 3, 3) == 0.0);
}

TEST_CASE("every hyperfine element of the published tables with its sign") {
  NEEDS_REFERENCE_DATA(folder);
  double worst = 0.0;
  for (const auto& table : kTables) {
    const auto rows = rows_of(*folder + "/angular/" + table.file + "_dme_squares.csv");
    REQUIRE(rows.size() == table.elements);
    for (const auto& row : rows) {  // line, F, mF, F', mF', polarisation, sign, square
      const int twice_J_upper = row.at(0) == "D1" ? 1 : 3;
      const double found = signed_square(hyperfine_factor(table.twice_I, 1, doubled(row.at(1)), doubled(row.at(2)),
                                                          twice_J_upper, doubled(row.at(3)), doubled(row.at(4))));
      const double expected = ratio(row.at(6)) * ratio(row.at(7));
      worst = std::max(worst, std::abs(found - expected));
      INFO(table.file << " " << row.at(0) << " F=" << row.at(1) << " m=" << row.at(2) << " F'=" << row.at(3)
                      << " m'=" << row.at(4));
      CHECK(std::abs(found - expected) < 1e-15);
    }
  }
  INFO("largest deviation of a square: " << worst);
  CHECK(worst < 1e-15);
}

TEST_CASE("every relative strength of the published tables") {
  NEEDS_REFERENCE_DATA(folder);
  for (const auto& table : kTables) {
    const auto rows = rows_of(*folder + "/angular/" + table.file + "_SFF.csv");
    REQUIRE(rows.size() == table.strengths);
    for (const auto& row : rows) {  // line, F, F', S
      const int twice_J_upper = row.at(0) == "D1" ? 1 : 3;
      const double found = hyperfine_strength(table.twice_I, 1, doubled(row.at(1)), twice_J_upper, doubled(row.at(2)));
      CHECK(std::abs(found - ratio(row.at(3))) < 1e-15);
    }
  }
}

TEST_CASE("what decays from an upper state adds up to the line") {
  // Sum rule: the elements from one upper state, squared, add up to (2J+1)/(2J'+1) (Steck, section on dipole elements).
  for (const int twice_m_upper : {-6, -2, 0, 4}) {
    double sum = 0.0;
    for (const int twice_F : {2, 4}) {
      for (int twice_m = -twice_F; twice_m <= twice_F; twice_m += 2) {
        sum += std::pow(hyperfine_factor(3, 1, twice_F, twice_m, 3, 6, twice_m_upper), 2);
      }
    }
    CHECK(sum == Approx(0.5).epsilon(1e-14));
  }
}

TEST_CASE("hydrogen: <1s|z|2p0> from the decay rate") {
  // Bethe & Salpeter (1957): omega = 3/8 E_h/hbar and A(2p) = (2/3)^8 alpha^3 E_h/hbar give 128 sqrt(2)/243 a0 exactly.
  using namespace constants;
  const double fine_structure =
      kElementaryCharge * kElementaryCharge / (4.0 * kPi * kVacuumPermittivity * kReducedPlanck * kSpeedOfLight);
  const double hartree_hz = fine_structure * fine_structure * kElectronMass * kSpeedOfLight * kSpeedOfLight / kPlanck;
  const double frequency_hz = 0.375 * hartree_hz;
  const double linewidth_hz = std::pow(2.0 / 3.0, 8) * std::pow(fine_structure, 3) * hartree_hz;
  const double element =
      reduced_dipole_C_m(frequency_hz, linewidth_hz, 0, 2) * std::abs(hyperfine_factor(0, 0, 0, 0, 2, 2, 0));
  CHECK(element / kDipoleAtomicUnit == Approx(128.0 * std::sqrt(2.0) / 243.0).epsilon(3e-9));  // CODATA's own consistency
  CHECK(element / kDipoleAtomicUnit == Approx(0.74493554).epsilon(1e-8));
  CHECK(partial_linewidth_hz(frequency_hz, reduced_dipole_C_m(frequency_hz, 1e6, 1, 3), 1, 3) == Approx(1e6).epsilon(1e-14));
}

TEST_CASE("spins as people write them") {
  CHECK(half_text(3) == "3/2");
  CHECK(half_text(-4) == "-2");
  CHECK(read_half("3/2", "m").value() == 3);
  CHECK(read_half("-1/2", "m").value() == -1);
  CHECK(read_half("+2", "m").value() == 4);
  CHECK(read_half("0", "m").value() == 0);
  for (const auto* wrong : {"", "+", "-", "1.5", "4/2", "3/4", "x", "1/", "/2", "++1", "+-1", "51", "99999999999", "2 "}) {
    INFO(wrong);
    CHECK_FALSE(read_half(wrong, "m"));
  }
}
