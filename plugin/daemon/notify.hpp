// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string_view>

namespace halfturn::daemon {

/// Tells the service manager how things stand: one datagram (`READY=1`, `STOPPING=1`, `RELOADING=1`) to the socket that
/// NOTIFY_SOCKET names, as sd_notify(3) describes; a name that begins with `@` lies in the abstract name space. Returns
/// whether it was sent; without NOTIFY_SOCKET nothing happens.
bool notify(std::string_view state);

}  // namespace halfturn::daemon
