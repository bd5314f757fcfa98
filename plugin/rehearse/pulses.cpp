// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/pulses.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "plugin/rehearse/reply.hpp"

namespace halfturn::rehearse {
namespace {

using constants::kPi;
using nlohmann::json;
using Pulses = std::map<std::string, PulseInForce>;

template <class Map>
std::string names(const Map& map) {
  std::string list;
  for (const auto& entry : map) list += (list.empty() ? "" : ", ") + entry.first;
  return list.empty() ? "none" : list;
}

/// A drive's pulses are given as `{NAME: seconds}`.
Result<Pulses> lengths_in_force(const std::string& drive, const json& state) {
  const auto& drives = member(state, "drives");
  const auto& pulses = member(member(drives, drive), "pulses");
  if (!member(drives, drive).is_object()) {
    const auto known = drives.is_object() ? drives.get<std::map<std::string, json>>() : std::map<std::string, json>();
    return fault("unknown_drive", "drive", "the daemon has no drive '" + drive + "'; it has: " + names(known));
  }
  Pulses found;
  for (const auto& [name, value] : pulses.items()) {
    const auto length_s = number(pulses, name);
    if (length_s && *length_s > 0) found[name].length_s = *length_s;
  }
  if (found.empty()) {
    return fault("bad_reply", "drives." + drive + ".pulses",
                 "the daemon names no pulse length of this drive; the rehearsal needs pulses that are adjusted in length");
  }
  return found;
}

/// A flop as it would look if the longest pulse were a pi pulse.
json made_up_scan(const std::string& drive, const std::string& taken_at, const Pulses& pulses) {
  double longest_s = 0;
  for (const auto& [name, pulse] : pulses) longest_s = std::max(longest_s, pulse.length_s);
  json lengths = json::array();
  json counts = json::array();
  for (int point = 1; point <= 24; ++point) {
    lengths.push_back(longest_s * point / 5);
    counts.push_back(static_cast<int>(std::lround(50 - 45 * std::cos(kPi * point / 5))));
  }
  return {{"scan_name", "question"}, {"drive", drive}, {"taken_at", taken_at}, {"duration_s", lengths}, {"counts", counts}, {"shots", 100}};
}

}  // namespace

Result<Pulses> ask_pulses(const std::string& drive, const std::string& taken_at, const Ask& ask) {
  const auto state = ask("status", json::object());
  if (!state) return tl::make_unexpected(state.error());
  auto pulses = lengths_in_force(drive, *state);
  if (!pulses) return pulses;
  const auto reply = ask("fit", {{"scan", made_up_scan(drive, taken_at, *pulses)}, {"options", {{"store", false}}}});
  if (!reply) return tl::make_unexpected(reply.error());
  for (auto& [name, pulse] : *pulses) {
    const auto angle_rad = number(member(member(*reply, "pulses"), name), "angle_rad");
    if (!angle_rad || !(*angle_rad > 0)) {
      return fault("bad_reply", "pulses." + name + ".angle_rad", "the daemon's reply states no angle of this pulse");
    }
    pulse.angle_rad = *angle_rad;
  }
  return pulses;
}

Result<std::string> choose_pulse(const Pulses& pulses, const std::string& wanted) {
  if (!wanted.empty() && !pulses.count(wanted)) {
    return fault("bad_value", "pulse", "the drive has no pulse '" + wanted + "'; it has: " + names(pulses));
  }
  if (!wanted.empty()) return wanted;
  const auto from_pi = [](const auto& entry) { return std::abs(entry.second.angle_rad - kPi); };
  const auto nearest = std::min_element(pulses.begin(), pulses.end(),
                                        [&](const auto& a, const auto& b) { return from_pi(a) < from_pi(b); });
  return nearest->first;
}

}  // namespace halfturn::rehearse
