// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <map>
#include <string>

#include "model/quantity/result.hpp"
#include "plugin/rehearse/drive.hpp"

/// What the daemon knows of a drive before the night.
namespace halfturn::rehearse {

/// The pulses of a drive with their angles and the lengths in force. The lengths come from `status`; the angles from the reply
/// to a made-up flop, taken at `taken_at`, that is not stored. Faults: `unknown_drive`, `bad_reply`, and those of `ask`.
Result<std::map<std::string, PulseInForce>> ask_pulses(const std::string& drive, const std::string& taken_at, const Ask& ask);

/// The pulse `wanted`, or where that is empty the one whose angle is nearest pi. Fault `bad_value` that names the pulses there are.
Result<std::string> choose_pulse(const std::map<std::string, PulseInForce>& pulses, const std::string& wanted);

}  // namespace halfturn::rehearse
