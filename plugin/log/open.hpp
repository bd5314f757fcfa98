// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <memory>
#include <string>

#include "plugin/log/sqlite.hpp"

namespace halfturn::log {

/// In the header of every log file, at byte 68: `Hfln`.
inline constexpr std::int64_t kApplicationId = 0x48666c6e;

/// The steps of `open` (sqlite_log.hpp), each a Fault that says what was found and what to do.
/// A connection to a checked, current log for writing, made or migrated where needed.
Result<std::unique_ptr<sqlite::Database>> open_to_write(const std::string& path);
/// A connection to a current log for reading.
Result<std::unique_ptr<sqlite::Database>> open_to_read(const std::string& path);

}  // namespace halfturn::log
