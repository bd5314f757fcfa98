// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string_view>

namespace halfturn::fuzz {

/// Decodes any bytes as a request, a stored scan and a stored reply, and aborts where what must hold does not.
void decode_target(std::string_view bytes);

}  // namespace halfturn::fuzz
