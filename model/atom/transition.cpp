// SPDX-License-Identifier: Apache-2.0
#include "model/atom/transition.hpp"

#include <array>
#include <utility>

namespace halfturn::atom {
namespace {

constexpr std::array<std::pair<Multipole, std::string_view>, 5> kMultipoles = {{
    {Multipole::electric_dipole, "electric_dipole"},
    {Multipole::magnetic_dipole, "magnetic_dipole"},
    {Multipole::electric_quadrupole, "electric_quadrupole"},
    {Multipole::two_photon, "two_photon"},
    {Multipole::induced, "induced"},
}};

constexpr std::array<std::pair<Status, std::string_view>, 3> kStatuses = {{
    {Status::read, "read"},
    {Status::quoted, "quoted"},
    {Status::recalled, "recalled"},
}};

template <class T, std::size_t N>
Result<T> read_word(const std::array<std::pair<T, std::string_view>, N>& words, std::string_view text,
                    const std::string& where) {
  std::string known;
  for (const auto& [value, word] : words) {
    if (word == text) return value;
    known += (known.empty() ? "" : ", ") + std::string(word);
  }
  return fault("bad_value", where, "found '" + std::string(text) + "', expected one of " + known);
}

template <class T, std::size_t N>
std::string_view word_of(const std::array<std::pair<T, std::string_view>, N>& words, T wanted) {
  for (const auto& [value, word] : words) {
    if (value == wanted) return word;
  }
  return "unknown";
}

}  // namespace

std::string_view name_of(Multipole multipole) { return word_of(kMultipoles, multipole); }

Result<Multipole> read_multipole(std::string_view text, const std::string& where) {
  return read_word(kMultipoles, text, where);
}

std::string_view name_of(Status status) { return word_of(kStatuses, status); }

Result<Status> read_status(std::string_view text, const std::string& where) { return read_word(kStatuses, text, where); }

std::string_view name_of(Polarisation polarisation) {
  if (polarisation == Polarisation::pi) return "pi";
  return polarisation == Polarisation::sigma_plus ? "sigma+" : "sigma-";
}

std::optional<Polarisation> read_polarisation(std::string_view text) {
  if (text == "pi" || text == "\u03c0") return Polarisation::pi;
  if (text == "sigma+" || text == "\u03c3+") return Polarisation::sigma_plus;
  if (text == "sigma-" || text == "\u03c3-") return Polarisation::sigma_minus;
  return std::nullopt;
}

}  // namespace halfturn::atom
