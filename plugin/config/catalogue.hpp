// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <vector>

#include "model/atom/catalogue.hpp"
#include "model/quantity/result.hpp"

namespace halfturn::config {

/// The lines of a catalogue in the form of schemas/transitions.yaml. Fault `bad_value` with all that is wrong, one a line,
/// each with line, column and path.
Result<std::vector<atom::CatalogueLine>> read_catalogue(const std::string& text);

/// The catalogue that the program carries inside itself, read once.
const Result<std::vector<atom::CatalogueLine>>& built_in_catalogue();

}  // namespace halfturn::config
