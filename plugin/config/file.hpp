// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <string>

#include "model/quantity/result.hpp"

namespace halfturn::config {

/// The whole of a file. Fault `bad_value` where it cannot be read or is longer than `limit` bytes.
Result<std::string> file_text(const std::string& path, std::size_t limit);

}  // namespace halfturn::config
