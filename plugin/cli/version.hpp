// SPDX-License-Identifier: Apache-2.0
#pragma once

namespace halfturn::cli {

/// The project's version, from the build.
inline constexpr const char* kVersion = HALFTURN_VERSION;

}  // namespace halfturn::cli
