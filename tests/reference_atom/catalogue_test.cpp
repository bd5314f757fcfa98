// SPDX-License-Identifier: Apache-2.0
// The catalogue as it stands in schemas/transitions.yaml: every line consistent, every name usable, and its numbers those of
// the published table of check values.
#include "model/atom/catalogue.hpp"

#include <yaml-cpp/yaml.h>

#include <cmath>
#include <fstream>
#include <map>
#include <set>
#include <sstream>
#include <string>
#include <vector>

#include "model/atom/light.hpp"
#include "model/quantity/constants.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::atom;
using constants::kDipoleAtomicUnit;

namespace {

std::optional<Quoted> number(const YAML::Node& node) {
  if (!node) return std::nullopt;
  Quoted made;
  made.value = node["value"].as<double>();
  made.sigma = node["sigma"].as<double>();
  made.source = node["source"].as<std::string>();
  made.status = read_status(node["status"].as<std::string>(), "status").value();
  if (node["computed"]) made.computed = node["computed"].as<bool>();
  return made;
}

Level level(const YAML::Node& node) {
  Level made;
  made.term = node["term"].as<std::string>();
  made.twice_J = node["twice_J"].as<int>();
  if (node["twice_S"]) made.twice_S = node["twice_S"].as<int>();
  made.parity = read_parity(node["parity"].as<std::string>(), "parity").value();
  return made;
}

CatalogueLine line(const YAML::Node& node) {
  CatalogueLine made;
  made.species = node["species"].as<std::string>();
  made.labels = node["labels"].as<std::vector<std::string>>();
  made.twice_I = node["twice_I"].as<int>();
  made.kind = read_multipole(node["kind"].as<std::string>(), "kind").value();
  made.lower = level(node["lower"]);
  made.upper = level(node["upper"]);
  made.wavelength_m = number(node["wavelength_m"]);
  made.frequency_hz = number(node["frequency_hz"]);
  made.lifetime_s = number(node["lifetime_s"]);
  made.linewidth_hz = number(node["linewidth_hz"]);
  made.branching = number(node["branching"]);
  made.partial_linewidth_hz = number(node["partial_linewidth_hz"]);
  made.partial_rate_per_s = number(node["partial_rate_per_s"]);
  made.reduced_dipole_ea0 = number(node["reduced_dipole_ea0"]);
  made.saturation_w_m2 = number(node["saturation_w_m2"]);
  made.recommended = node["recommended"].as<std::vector<std::string>>();
  return made;
}

const std::vector<CatalogueLine>& catalogue() {
  static const auto lines = [] {
    std::vector<CatalogueLine> read;
    for (const auto& node : YAML::LoadFile(std::string(HALFTURN_SOURCE_DIR) + "/schemas/transitions.yaml")["lines"]) {
      read.push_back(line(node));
    }
    return read;
  }();
  return lines;
}

const CatalogueLine& find(const std::string& species, const std::string& label) {
  for (const auto& candidate : catalogue()) {
    if (candidate.species == species && candidate.labels.front() == label) return candidate;
  }
  FAIL("no line " << species << " " << label);
  std::abort();
}

/// Cells of a CSV row; one that begins with a quote may hold commas.
std::vector<std::string> cells(const std::string& row) {
  std::vector<std::string> made(1);
  bool is_quoted = false;
  for (const char c : row) {
    if (c == '"')
      is_quoted = !is_quoted;
    else if (c == ',' && !is_quoted)
      made.emplace_back();
    else if (c != '\r')
      made.back() += c;
  }
  return made;
}

}  // namespace

TEST_CASE("every line of the catalogue can be used") {
  CHECK(catalogue().size() >= 15);
  for (const auto& line : catalogue()) {
    const auto checked = check_line(line);
    INFO(line.species << " " << line.labels.front() << ": " << (checked ? "" : checked.error().message));
    CHECK(checked);
  }
}

TEST_CASE("names are unique and resolve in the whole catalogue") {
  const auto listed = names(catalogue());
  CHECK(std::set<std::string>(listed.begin(), listed.end()).size() == listed.size());
  for (const auto& name : listed) {
    const auto made = resolve(name, catalogue());
    INFO(name << ": " << (made ? "" : made.error().message));
    REQUIRE(made);
    if (made->multipole != Multipole::electric_dipole) continue;
    REQUIRE(made->dipole_C_m);
    const auto light = light_from_rabi_hz(*made, 1e5);
    REQUIRE(light);
    CHECK(light->intensity_w_m2 > 0.0);
    CHECK(std::isfinite(light->intensity_w_m2));
    CHECK(saturation_intensity(*made).value() >= 0.9999 * two_level_saturation_intensity(*made).value());
  }
}

TEST_CASE("the example of the contract resolves") {
  const auto made = resolve("Sr88 1S0 -> 3P1 m=0 pi", catalogue());
  REQUIRE(made);
  CHECK(made->wavelength_m * 1e9 == Approx(689.449).margin(1e-3));  // NIST Atomic Spectra Database, vacuum
}

TEST_CASE("the catalogue has the numbers of the published table") {
  NEEDS_REFERENCE_DATA(folder);
  const std::map<std::string, std::pair<std::string, std::string>> wanted = {
      {"Rb87 D2 5S1/2-5P3/2", {"Rb87", "D2"}},
      {"Rb87 D1 5S1/2-5P1/2", {"Rb87", "D1"}},
      {"Rb85 D2", {"Rb85", "D2"}},
      {"Rb85 D1", {"Rb85", "D1"}},
      {"Cs133 D2 6S1/2-6P3/2", {"Cs133", "D2"}},
      {"Cs133 D1 6S1/2-6P1/2", {"Cs133", "D1"}},
      {"Na23 D2 3S1/2-3P3/2", {"Na23", "D2"}},
      {"Na23 D1", {"Na23", "D1"}},
      {"K39 D2 4S1/2-4P3/2", {"K39", "D2"}},
      {"K39 D1", {"K39", "D1"}},
      {"Li6 D2 2S1/2-2P3/2", {"Li6", "D2"}},
      {"Li7 D2", {"Li7", "D2"}},
      {"Sr88 461 1S0-1P1", {"Sr88", "461"}},
      {"Sr88 689 1S0-3P1", {"Sr88", "689"}},
      {"Yb174 399 1S0-1P1", {"Yb174", "399"}},
      {"Yb174 556 1S0-3P1", {"Yb174", "556"}},
      {"Ca40+ 397 4S1/2-4P1/2", {"Ca40+", "397"}},
      {"Sr88+ 422 5S1/2-5P1/2", {"Sr88+", "422"}},
      {"Ba138+ 493 6S1/2-6P1/2", {"Ba138+", "493"}},
      {"Yb171+ 369.5 6S1/2-6P1/2", {"Yb171+", "369"}},
      {"Be9+ 313 2S1/2-2P3/2 (A=1.128e8)", {"Be9+", "313"}},
      {"Mg25+ 280 3S1/2-3P3/2", {"Mg25+", "280"}}};
  std::ifstream file(*folder + "/catalogue.csv");
  REQUIRE(file);
  std::string row;
  std::getline(file, row);
  std::size_t found = 0;
  while (std::getline(file, row)) {
    const auto cell = cells(row);
    const auto which = wanted.find(cell.at(0));
    if (which == wanted.end()) continue;
    ++found;
    INFO(cell[0]);
    const auto numbers = numbers_of(find(which->second.first, which->second.second)).value();
    // The table prints wavelengths to 1e-6 nm, rates and moments to six digits, moments in e a0 to 1e-5.
    CHECK(constants::kSpeedOfLight / numbers.frequency_hz.value * 1e9 == Approx(std::stod(cell[1])).epsilon(1e-8));
    CHECK(numbers.linewidth_hz->value / 1e6 == Approx(std::stod(cell[4])).epsilon(6e-6));
    CHECK(numbers.partial_linewidth_hz->value / 1e6 == Approx(std::stod(cell[6])).epsilon(6e-6));
    CHECK(numbers.reduced_dipole_C_m->value / kDipoleAtomicUnit == Approx(std::stod(cell[7])).epsilon(6e-6).margin(0.5e-5));
    CHECK(numbers.reduced_dipole_C_m->value * 1e30 == Approx(std::stod(cell[8]) * 1e30).epsilon(6e-6));
  }
  CHECK(found == wanted.size());
}

TEST_CASE("clock lines have the recommended frequencies") {
  // BIPM, CCTF 2021 recommended values (read).
  CHECK(numbers_of(find("Ca40+", "729")).value().frequency_hz.value == 411042129776400.4);
  CHECK(numbers_of(find("Sr88+", "674")).value().frequency_hz.value == 444779044095486.3);
  CHECK(numbers_of(find("Sr88", "698")).value().frequency_hz.value == 429228066418007.01);
  CHECK(numbers_of(find("Yb171", "578")).value().frequency_hz.value == 518295836590863.63);
  CHECK(numbers_of(find("Rb87", "hyperfine")).value().frequency_hz.value == 6834682610.9043126);
}
