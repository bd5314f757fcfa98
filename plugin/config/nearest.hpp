// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <span>
#include <string_view>

namespace halfturn::config {

/// How many letters must be changed, added, taken out or swapped with a neighbour to make one word the other (Damerau 1964,
/// in the form that edits no letter twice); upper and lower case count as the same letter.
std::size_t edit_distance(std::string_view a, std::string_view b);

/// The known word nearest to `word`, the first of several; empty where none is known.
std::string_view nearest(std::string_view word, std::span<const std::string_view> known);

}  // namespace halfturn::config
