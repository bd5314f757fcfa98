// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/catalogue.hpp"

#include "tests/support/catch.hpp"

using namespace halfturn;

namespace {

std::string line(const std::string& change) {
  return "format: 1\nlines:\n  - species: Rb85\n    labels: [D2]\n    twice_I: 5\n    kind: electric_dipole\n"
         "    lower: {term: 5S1/2, twice_J: 1, parity: even}\n    upper: {term: 5P3/2, twice_J: 3, parity: odd}\n"
         "    lifetime_s: {value: 26.2348e-9, sigma: 7.7e-12, source: \"D. A. Steck\", status: read}\n"
         "    recommended: [\"Rb85 D2 F=3 m=3 -> F'=4 m'=4 sigma+\"]\n    " +
         change + "\n";
}

std::string faults(const std::string& text) {
  const auto lines = config::read_catalogue(text);
  return lines ? "" : lines.error().message;
}

const std::string kWavelength =
    "wavelength_m: {value: 780.241368271e-9, sigma: 2.7e-17, source: \"D. A. Steck\", status: read, computed: false}";

}  // namespace

TEST_CASE("The catalogue inside the program is sound") {
  const auto& lines = config::built_in_catalogue();
  REQUIRE(lines.has_value());
  CHECK(lines->size() >= 20);
  for (const std::string& name : atom::names(*lines)) {
    CAPTURE(name);
    CHECK(atom::resolve(name, *lines).has_value());
  }
}

// Steck, "Rubidium 85 D Line Data", tables 3 and 7.
TEST_CASE("A line of the catalogue is read to the letter") {
  const auto lines = config::read_catalogue(line(kWavelength));
  REQUIRE(lines.has_value());
  const atom::CatalogueLine& one = lines->at(0);
  CHECK(one.species == "Rb85");
  CHECK(one.labels == std::vector<std::string>{"D2"});
  CHECK(one.twice_I == 5);
  CHECK(one.kind == atom::Multipole::electric_dipole);
  CHECK(one.lower.term == "5S1/2");
  CHECK(one.upper.twice_J == 3);
  CHECK(one.upper.parity == -1);
  CHECK(one.wavelength_m->value == 780.241368271e-9);
  CHECK(one.wavelength_m->sigma == 2.7e-17);
  CHECK(one.wavelength_m->source == "D. A. Steck");
  CHECK(one.lifetime_s->status == atom::Status::read);
  const auto transition = atom::resolve("Rb85 D2 F=3 m=3 -> F'=4 m'=4 sigma+", *lines);
  REQUIRE(transition.has_value());
  CHECK(*transition->dipole_C_m == Approx(2.53444e-29).epsilon(2e-6));
}

TEST_CASE("Faults of a catalogue have their places") {
  CHECK(faults(line("wavelength: {value: 1}"))
            .find("catalogue:11:5: lines[0].wavelength: found the unknown key \"wavelength\", expected a known key: "
                  "the nearest is \"wavelength_m\"") == 0);
  CHECK(faults(line("wavelength_m: {value: 780 nm, sigma: 0, source: x, status: seen}")) ==
        "catalogue:11:27: lines[0].wavelength_m.value: found \"780 nm\" (a length), expected a number without a unit, such "
        "as 780\n"
        "catalogue:11:64: lines[0].wavelength_m.status: found \"seen\", expected read, quoted or recalled");
  CHECK(faults(line(kWavelength + "\n    twice_I: 5")) ==
        "catalogue:12:5: lines[0].twice_I: found the key \"twice_I\" a second time (first in line 5), expected it once");
  CHECK(faults("format: 1\nlines: []\n") == "catalogue:2:8: lines: found an empty list, expected a list of lines");
  CHECK(faults("format: 1\n").find("catalogue:1:1: lines: found nothing, expected a list of lines") == 0);
  // A line that contradicts itself: the lifetime of Rb85's D2 beside the linewidth of its D1.
  CHECK(faults(line(kWavelength + "\n    linewidth_hz: {value: 5.75e+6, sigma: 1.0e+3, source: x, status: read}"))
            .find("catalogue:3:5: lines[0]: ") == 0);
}
