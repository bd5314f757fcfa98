// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <memory>
#include <string>

#include "plugin/log/log.hpp"

/// The log in a SQLite file (tables: schemas/log/). Writes are durable when `commit` returns: write-ahead log, synchronous=FULL.
namespace halfturn::log {

enum class Access { read_write, read_only };

/// Opens the log at `path`.
///
/// read_write: makes the file where there is none, brings an older one up to date, and holds the lock `PATH.lock`, so that one
/// process writes at a time. The pages of an existing file are checked first (0.13 s for 20,000 fits). read_only: the file must
/// be there and of this version; reads while another process writes.
///
/// Faults, `log_unavailable`: another process writes the log; the file is not a log of this program, is damaged, or is of a
/// newer version; its folder is missing or forbidden. Such a file is left untouched.
Result<std::unique_ptr<Log>> open(const std::string& path, Access access);

}  // namespace halfturn::log
