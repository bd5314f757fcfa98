// SPDX-License-Identifier: Apache-2.0
#include "plugin/log/check.hpp"

namespace halfturn::log {

Result<void> check(const Event& event, const Bulk* bulk) {
  if (event.drive.empty()) return fault("bad_value", "event.drive", "found no name, expected the name of a drive");
  const bool fit = event.kind == "fit";
  if (!fit && event.kind != "applied" && event.kind != "hold" && event.kind != "release") {
    return fault("bad_value", "event.kind", "found `" + event.kind + "`, expected fit, applied, hold or release");
  }
  if (bulk != nullptr && !fit) {
    return fault("bad_value", "event.kind", "found `" + event.kind + "` with a scan, expected that of a fit alone");
  }
  for (const auto& [name, amplitude] : event.amplitudes)
    if (event.pulses_s.count(name) > 0)
      return fault("bad_value", "event.amplitudes." + name, "found the pulse with a length as well, expected one of the two");
  return {};
}

Fault no_group() {
  return {"internal", "log", "found a write outside a group, expected `begin` before it (an earlier failure ends a group)"};
}

Fault group_open_already() {
  return {"internal", "log", "found `begin` inside a group of writes, expected `commit` or `roll_back` before it"};
}

Fault id_reused(const std::string& id) {
  return {"id_reused", "id",
          "The id `" + id + "` already stands for a request of other content; every request needs an id of its own."};
}

}  // namespace halfturn::log
