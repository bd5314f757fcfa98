// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cmath>
#include <functional>
#include <map>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "model/quantity/constants.hpp"
#include "plugin/rehearse/apparatus.hpp"
#include "plugin/rehearse/drive.hpp"
#include "plugin/wire/time.hpp"

namespace halfturn::tests {

/// Stands in for the daemon in tests of the rehearsal: it knows the truth, answers every scan with it, and keeps what it was
/// sent. `spoil` may change a reply before it leaves.
class FakeDaemon {
 public:
  FakeDaemon(const rehearse::ApparatusSettings& settings, std::uint64_t seed, double night_s, wire::Time starts_at)
      : truth_(settings, seed, night_s), starts_at_(starts_at) {}

  std::map<std::string, double> angles = {{"flip", constants::kPi}, {"split", constants::kPi / 2}};
  std::map<std::string, double> lengths_s = {{"flip", 4.00e-6}, {"split", 2.00e-6}};
  double tick_s = 8e-9;
  std::function<void(const nlohmann::json& scan, nlohmann::json& reply)> spoil = [](const auto&, auto&) {};
  std::vector<nlohmann::json> scans, applied;
  int questions = 0;

  nlohmann::json answer(const std::string& kind, const nlohmann::json& body) {
    if (kind == "status") return {{"kind", "state"}, {"drives", {{"red", {{"pulses", lengths_s}}}}}};
    if (kind == "applied") return note(body);
    if (kind != "fit") return {{"kind", "error"}, {"code", "unknown_kind"}, {"where", "kind"}, {"message", "unknown: " + kind}};
    return fitted(body);
  }

  rehearse::Ask ask() {
    return [this](const std::string& kind, nlohmann::json body) -> Result<nlohmann::json> { return answer(kind, body); };
  }

 private:
  nlohmann::json note(const nlohmann::json& body) {
    applied.push_back(body);
    for (const auto& [name, length_s] : body.at("pulses").items()) lengths_s.at(name) = length_s.get<double>();
    return {{"kind", "noted"}};
  }

  nlohmann::json fitted(const nlohmann::json& body) {
    const auto& scan = body.at("scan");
    const bool stored = !body.contains("options");
    if (stored) scans.push_back(scan); else ++questions;
    const double time_s = static_cast<double>(*wire::parse_time(scan.at("taken_at").get<std::string>()) - starts_at_) * 1e-9;
    nlohmann::json reply = {{"kind", "fitted"}, {"verdict", "apply"}, {"reasons", nlohmann::json::array()}, {"carrier_shift_hz", 0.0}};
    const double carrier_hz = scan.value("carrier_hz", truth_.truth(time_s).line_hz);
    const bool is_flop = scan.contains("duration_s");
    for (const auto& [name, angle_rad] : angles) reply["pulses"][name] = pulse(name, angle_rad, time_s, carrier_hz, is_flop);
    const double rabi_hz = truth_.truth(time_s).rabi_hz;
    if (is_flop) reply["rabi_hz"] = {{"value", rabi_hz}, {"low", rabi_hz * 0.99}, {"high", rabi_hz * 1.01}};
    if (!is_flop) reply["carrier_shift_hz"] = truth_.truth(time_s).line_hz - carrier_hz;
    if (!is_flop) reply["line_offset_hz"] = {{"value", reply["carrier_shift_hz"]}};
    if (stored) spoil(scan, reply);
    return reply;
  }

  nlohmann::json pulse(const std::string& name, double angle_rad, double time_s, double carrier_hz, bool is_flop) const {
    const rehearse::Truth now = truth_.truth(time_s);
    const double exact_s = truth_.settings().dead_time_s + angle_rad / constants::kTwoPi / std::hypot(now.rabi_hz, carrier_hz - now.line_hz);
    const double length_s = is_flop ? std::round(exact_s / tick_s) * tick_s : lengths_s.at(name);
    return {{"verdict", is_flop ? "apply" : "keep"}, {"angle_rad", angle_rad}, {"length_s", length_s}, {"exact_s", exact_s}};
  }

  rehearse::Apparatus truth_;
  wire::Time starts_at_;
};

}  // namespace halfturn::tests
