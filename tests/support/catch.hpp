// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <catch2/catch.hpp>

#include <cstdlib>
#include <optional>
#include <string>

namespace halfturn::tests {

/// The folder of published check values, given by the environment variable HALFTURN_REFERENCE_DATA; none where it is not set.
inline std::optional<std::string> reference_data() {
  const char* folder = std::getenv("HALFTURN_REFERENCE_DATA");
  if (folder == nullptr || *folder == '\0') return std::nullopt;
  return std::string(folder);
}

}  // namespace halfturn::tests

/// Ends a test that needs the published check values where they are absent, and says so in the list of results.
#define NEEDS_REFERENCE_DATA(variable)                                                         \
  const auto variable = halfturn::tests::reference_data();                                     \
  if (!variable) {                                                                             \
    WARN("skipped: set HALFTURN_REFERENCE_DATA to the folder of published check values");      \
    return;                                                                                    \
  }
