// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <nlohmann/json.hpp>
#include <optional>
#include <string>

/// Reading replies without trusting their shape: what is absent, null or of another type is not there.
namespace halfturn::rehearse {

/// The member `key`, or null.
const nlohmann::json& member(const nlohmann::json& object, const std::string& key);

/// The member as a finite number.
std::optional<double> number(const nlohmann::json& object, const std::string& key);

/// The member as text, empty where there is none.
std::string text(const nlohmann::json& object, const std::string& key);

}  // namespace halfturn::rehearse
