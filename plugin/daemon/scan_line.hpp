// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/wire/reply.hpp"

namespace halfturn::daemon {

/// A decided scan in one line for the program's own log: `red night-0041: apply, 125.34(12) kHz; first`. The frequency is left
/// out where there is none; behind the semicolon stand the codes of the reasons. Behind the verdict
/// stands `(not stored)` where that is so.
std::string scan_line(const wire::Fitted& scan);

}  // namespace halfturn::daemon
