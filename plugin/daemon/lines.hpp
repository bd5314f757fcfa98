// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <spdlog/common.h>

#include <memory>

namespace spdlog {
class logger;
}

namespace halfturn::daemon {

/// The program's own log lines, such as `2026-02-03T04:05:06.789Z info red night-41: apply, 125.34(12) kHz`, in UTC, written to a
/// file descriptor. A pipe that nobody empties, or a terminal that is held, costs lines and never makes the program wait; how
/// many were lost is said once there is room again.
std::shared_ptr<spdlog::logger> lines_to(int descriptor, spdlog::level::level_enum level);

}  // namespace halfturn::daemon
