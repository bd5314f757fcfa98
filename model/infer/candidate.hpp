// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstdint>
#include <optional>
#include <string_view>

namespace halfturn::infer {

/// Candidate dynamics: what damps the oscillation on top of a lifetime that the transition is known to have.
/// `undamped` nothing, `dephasing` a free pure dephasing rate, `decay` a free decay e to g, `leak` a free decay out of the pair.
enum class Dynamics : std::uint8_t { undamped, dephasing, decay, leak };

inline constexpr std::array<std::string_view, 4> kDynamicsNames = {"undamped", "dephasing", "decay", "leak"};

constexpr std::string_view name(Dynamics dynamics) { return kDynamicsNames[static_cast<std::size_t>(dynamics)]; }

constexpr std::optional<Dynamics> dynamics_named(std::string_view text) {
  for (std::size_t i = 0; i < kDynamicsNames.size(); ++i)
    if (kDynamicsNames[i] == text) return static_cast<Dynamics>(i);
  return std::nullopt;
}

/// A set of candidates.
struct DynamicsSet {
  std::uint8_t bits = 0b1111;
  constexpr bool has(Dynamics d) const { return (bits >> static_cast<unsigned>(d)) & 1u; }
  constexpr void add(Dynamics d) { bits = static_cast<std::uint8_t>(bits | (1u << static_cast<unsigned>(d))); }
  static constexpr DynamicsSet none() { return {0}; }
};

}  // namespace halfturn::infer
