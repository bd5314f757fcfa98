// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <utility>

#include "model/atom/catalogue.hpp"
#include "plugin/config/reader.hpp"

/// What transitions and the catalogue's lines share.
namespace halfturn::config {

/// Twice a spin or a projection: `3/2`, `-1/2`, `1.5`, `2`. Noted as a fault where it is none, or outside low ... high (of
/// the doubled number).
std::optional<int> read_doubled(Reader& reader, const Place& at, int low, int high);

/// A value of an enumeration by the words of `reader`, the words listed in the fault.
std::optional<atom::Multipole> read_multipole(Reader& reader, const Place& at);
std::optional<int> read_parity(Reader& reader, const Place& at);

}  // namespace halfturn::config
