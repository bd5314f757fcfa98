// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string_view>
#include <vector>

/// The normative files of schemas/ that the program carries inside itself.
namespace halfturn::embedded {

/// The text of a file by its path below schemas/ (`transitions.yaml`, `log/001_first.sql`); empty where there is none.
std::string_view file(std::string_view name);

/// The paths of all files carried, sorted.
std::vector<std::string_view> names();

}  // namespace halfturn::embedded
