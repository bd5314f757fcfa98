// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <utility>
#include <vector>

#include "model/atom/catalogue.hpp"

/// Lines for tests, written out by hand from their sources; the program's own catalogue is tested in tests/reference_atom.
namespace halfturn::tests {

inline atom::Level level(std::string term, int twice_J, int parity) {
  atom::Level made;
  made.term = std::move(term);
  made.twice_J = twice_J;
  made.parity = parity;
  return made;
}

inline atom::CatalogueLine line(std::string species, std::string label, int twice_I, atom::Level lower, atom::Level upper) {
  atom::CatalogueLine made;
  made.species = std::move(species);
  made.labels = {std::move(label)};
  made.twice_I = twice_I;
  made.lower = std::move(lower);
  made.upper = std::move(upper);
  return made;
}

/// Steck, "Rubidium 87 D Line Data": 780.241 209 686(13) nm, 26.2348(77) ns, d_S 4.227 52(62) e a0.
inline atom::CatalogueLine rb87_d2() {
  auto made = line("Rb87", "D2", 3, level("5S1/2", 1, 1), level("5P3/2", 3, -1));
  made.wavelength_m = atom::Quoted{780.241209686e-9, 1.3e-17, "Steck"};
  made.lifetime_s = atom::Quoted{26.2348e-9, 7.7e-12, "Steck"};
  made.recommended = {"Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+"};
  return made;
}

/// The same sheet: 377.107 463 380(11) THz, 27.679(27) ns.
inline atom::CatalogueLine rb87_d1() {
  auto made = line("Rb87", "D1", 3, level("5S1/2", 1, 1), level("5P1/2", 1, -1));
  made.frequency_hz = atom::Quoted{377.107463380e12, 1.1e4, "Steck"};
  made.lifetime_s = atom::Quoted{27.679e-9, 2.7e-11, "Steck"};
  made.recommended = {"Rb87 D1 F=2 m=2 -> F'=2 m'=2 pi"};
  return made;
}

/// Steck, "Rubidium 85 D Line Data", tables 3 and 4.
inline atom::CatalogueLine rb85_d2() {
  auto made = line("Rb85", "D2", 5, level("5S1/2", 1, 1), level("5P3/2", 3, -1));
  made.wavelength_m = atom::Quoted{780.241368271e-9, 2.7e-17, "Steck"};
  made.lifetime_s = atom::Quoted{26.2348e-9, 7.7e-12, "Steck"};
  made.recommended = {"Rb85 D2 F=3 m=3 -> F'=4 m'=4 sigma+"};
  return made;
}

inline atom::CatalogueLine rb85_d1() {
  auto made = line("Rb85", "D1", 5, level("5S1/2", 1, 1), level("5P1/2", 1, -1));
  made.wavelength_m = atom::Quoted{794.979014933e-9, 9.6e-17, "Steck"};
  made.lifetime_s = atom::Quoted{27.679e-9, 2.7e-11, "Steck"};
  made.recommended = {"Rb85 D1 F=3 m=3 -> F'=3 m'=3 pi"};
  return made;
}

/// A. Kramida (2020), Hettrich et al. (2015), Ramm et al. (2013), as quoted.
inline atom::CatalogueLine ca_397() {
  auto made = line("Ca40+", "397", 0, level("4S1/2", 1, 1), level("4P1/2", 1, -1));
  made.frequency_hz = atom::Quoted{755.222766e12, 1e6, "Kramida"};
  made.lifetime_s = atom::Quoted{6.904e-9, 2.6e-11, "Hettrich"};
  made.branching = atom::Quoted{0.93565, 7e-5, "Ramm"};
  made.recommended = {"Ca40+ 4S1/2 m=-1/2 -> 4P1/2 m'=-1/2 pi"};
  return made;
}

/// NIST Atomic Spectra Database, as quoted: A = 9.53e7 and 3.10e7 1/s.
inline atom::CatalogueLine ba_493() {
  auto made = line("Ba138+", "493", 0, level("6S1/2", 1, 1), level("6P1/2", 1, -1));
  made.frequency_hz = atom::Quoted{607.426318e12, 1e6, "NIST"};
  made.partial_rate_per_s = atom::Quoted{9.53e7, 1e5, "NIST"};
  made.linewidth_hz = atom::Quoted{20.1013e6, 2e4, "NIST"};
  made.recommended = {"Ba138+ 6S1/2 m=-1/2 -> 6P1/2 m'=-1/2 pi"};
  return made;
}

/// NIST Atomic Spectra Database, as quoted: A = 4.69e4 1/s.
inline atom::CatalogueLine sr88_689() {
  auto made = line("Sr88", "689", 0, level("1S0", 0, 1), level("3P1", 2, -1));
  made.frequency_hz = atom::Quoted{434.828994e12, 1.5e8, "NIST"};
  made.partial_rate_per_s = atom::Quoted{4.69e4, 1e2, "NIST"};
  made.branching = atom::Quoted{1.0, 0.0, "only decay"};
  made.recommended = {"Sr88 1S0 -> 3P1 m=0 pi"};
  return made;
}

/// Level 27061.82 cm-1; Olmschenk et al. (2009), as quoted.
inline atom::CatalogueLine yb171_369() {
  auto made = line("Yb171+", "369", 1, level("6S1/2", 1, 1), level("6P1/2", 1, -1));
  made.frequency_hz = atom::Quoted{811.292954e12, 3e8, "NIST"};
  made.lifetime_s = atom::Quoted{8.12e-9, 2e-11, "Olmschenk"};
  made.branching = atom::Quoted{0.99499, 1.5e-4, "Olmschenk"};
  made.recommended = {"Yb171+ 369 F=0 m=0 -> F'=1 m'=0 pi"};
  return made;
}

inline atom::CatalogueLine ca_729() {
  auto made = line("Ca40+", "729", 0, level("4S1/2", 1, 1), level("3D5/2", 5, 1));
  made.kind = atom::Multipole::electric_quadrupole;
  made.frequency_hz = atom::Quoted{411042129776400.4, 0.8, "BIPM 2021"};
  made.lifetime_s = atom::Quoted{1.1649, 0.0044, "Shao"};
  made.recommended = {"Ca40+ 4S1/2 m=-1/2 -> 3D5/2 m'=-1/2"};
  return made;
}

inline atom::CatalogueLine rb87_hyperfine() {
  auto made = line("Rb87", "hyperfine", 3, level("5S1/2", 1, 1), level("5S1/2", 1, 1));
  made.kind = atom::Multipole::magnetic_dipole;
  made.frequency_hz = atom::Quoted{6834682610.9043126, 2.3e-6, "BIPM 2021"};
  made.recommended = {"Rb87 hyperfine F=1 m=0 -> F'=2 m'=0"};
  return made;
}

inline std::vector<atom::CatalogueLine> all_lines() {
  return {rb87_d2(), rb87_d1(),  rb85_d2(),   rb85_d1(), ca_397(),
          ba_493(),  sr88_689(), yb171_369(), ca_729(),  rb87_hyperfine()};
}

}  // namespace halfturn::tests
