// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/atoms.hpp"

#include <cmath>

namespace halfturn::config {
namespace {

std::optional<double> spin(std::string_view text) {
  if (text.ends_with("/2")) {
    const auto twice = decimal(text.substr(0, text.size() - 2));
    return twice && std::floor(*twice) == *twice ? std::optional(*twice / 2.0) : std::nullopt;
  }
  return decimal(text);
}

}  // namespace

std::optional<int> read_doubled(Reader& reader, const Place& at, int low, int high) {
  if (!at) return std::nullopt;
  const auto value = at.node->kind == Node::Kind::scalar ? spin(at.node->text) : std::nullopt;
  if (value) {
    const double twice = 2.0 * *value;
    if (std::floor(twice) == twice && twice >= low && twice <= high) return static_cast<int>(twice);
  }
  reader.fault(at, "found " + found(*at.node) + ", expected a whole or half number, such as 3/2" +
                       (low >= 0 ? ", of at least 0" : ""));
  return std::nullopt;
}

std::optional<atom::Multipole> read_multipole(Reader& reader, const Place& at) {
  static constexpr std::string_view kKinds[] = {"electric_dipole", "magnetic_dipole", "electric_quadrupole", "two_photon",
                                                "induced"};
  const auto kind = reader.choice(at, kKinds);  // in the order of atom::Multipole
  return kind ? std::optional(static_cast<atom::Multipole>(*kind)) : std::nullopt;
}

std::optional<int> read_parity(Reader& reader, const Place& at) {
  static constexpr std::string_view kParities[] = {"even", "odd"};
  const auto parity = reader.choice(at, kParities);
  return parity ? std::optional(*parity == 0 ? 1 : -1) : std::nullopt;
}

}  // namespace halfturn::config
