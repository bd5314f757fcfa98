// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <optional>
#include <string_view>

namespace halfturn::infer {

/// Candidate dynamics: what damps the oscillation on top of a lifetime that the transition is known to have.
/// - `undamped` nothing; `dephasing` a free pure dephasing rate, `decay` a free decay e to g, `leak` a free decay out of the pair,
///   `decay_dephasing` and `leak_dephasing` two of these at once;
/// - ensembles of atoms or shots (model/dynamics/ensemble.hpp): `spread` a Gaussian spread of the coupling, `doppler` one of the
///   detuning, `cloud` a Gaussian cloud in a Gaussian beam, `thermal` motional modes in thermal states (Prior::motion).
enum class Dynamics : std::uint8_t { undamped, dephasing, decay, leak, decay_dephasing, leak_dephasing, spread, doppler, cloud, thermal };

inline constexpr std::size_t kDynamicsCount = 10;
inline constexpr std::array<std::string_view, kDynamicsCount> kDynamicsNames = {
    "undamped", "dephasing", "decay", "leak", "decay_dephasing", "leak_dephasing", "spread", "doppler", "cloud", "thermal"};
inline constexpr std::array<Dynamics, kDynamicsCount> kAllDynamics = {
    Dynamics::undamped, Dynamics::dephasing, Dynamics::decay, Dynamics::leak, Dynamics::decay_dephasing, Dynamics::leak_dephasing,
    Dynamics::spread,   Dynamics::doppler,   Dynamics::cloud, Dynamics::thermal};

constexpr std::string_view name(Dynamics dynamics) { return kDynamicsNames[static_cast<std::size_t>(dynamics)]; }

constexpr std::optional<Dynamics> dynamics_named(std::string_view text) {
  for (std::size_t i = 0; i < kDynamicsNames.size(); ++i)
    if (kDynamicsNames[i] == text) return static_cast<Dynamics>(i);
  return std::nullopt;
}

constexpr bool has_two_rates(Dynamics d) { return d == Dynamics::decay_dephasing || d == Dynamics::leak_dephasing; }

/// Whether every shot is alike, up to one free rate: the candidates that are tried first.
constexpr bool is_simple(Dynamics d) { return d <= Dynamics::leak; }
constexpr bool is_ensemble(Dynamics d) { return d >= Dynamics::spread; }

/// A set of candidates.
struct DynamicsSet {
  std::uint16_t bits = (1u << kDynamicsCount) - 1u;
  constexpr bool has(Dynamics d) const { return (bits >> static_cast<unsigned>(d)) & 1u; }
  constexpr void add(Dynamics d) { bits = static_cast<std::uint16_t>(bits | (1u << static_cast<unsigned>(d))); }
  constexpr void remove(Dynamics d) { bits = static_cast<std::uint16_t>(bits & ~(1u << static_cast<unsigned>(d))); }
  constexpr bool empty() const { return bits == 0; }
  static constexpr DynamicsSet none() { return {0}; }
};

}  // namespace halfturn::infer
