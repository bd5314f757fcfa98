// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "plugin/log/log.hpp"

namespace halfturn::log {

/// Fault `bad_value` where an event has no drive or an unknown kind, or where something else than a fit has bulk.
Result<void> check(const Event& event, const Bulk* bulk);

/// The faults of writes in the wrong place.
Fault no_group();
Fault group_open_already();
Fault id_reused(const std::string& id);

}  // namespace halfturn::log
