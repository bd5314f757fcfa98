// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "plugin/wire/request.hpp"
#include "plugin/wire/writer.hpp"

namespace halfturn::wire {

/// Writes a scan as an object with the fields of the contract, in its order; absent ones are left out. Whole numbers are
/// written as integers, a weight that is the same everywhere as one number, and one that is the same at every site as one
/// list.
void write_scan(Writer& to, const Scan& scan);

/// Writes a request's fields apart from `proto`, `kind` and `id` into the map that is open. `points` holds its data beside
/// `scan_name`.
void write_fields(Writer& to, const Request& request);

/// Writes what two requests of the same content agree in: the kind and write_fields, as one map.
void write_content(Writer& to, const Request& request);

}  // namespace halfturn::wire
