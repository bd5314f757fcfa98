// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/reply.hpp"

#include <cmath>

namespace halfturn::rehearse {

const nlohmann::json& member(const nlohmann::json& object, const std::string& key) {
  static const nlohmann::json kNull;
  if (!object.is_object()) return kNull;
  const auto found = object.find(key);
  return found == object.end() ? kNull : *found;
}

std::optional<double> number(const nlohmann::json& object, const std::string& key) {
  const auto& value = member(object, key);
  if (!value.is_number()) return std::nullopt;
  const auto found = value.get<double>();
  return std::isfinite(found) ? std::optional<double>(found) : std::nullopt;
}

std::string text(const nlohmann::json& object, const std::string& key) {
  const auto& value = member(object, key);
  return value.is_string() ? value.get<std::string>() : std::string();
}

}  // namespace halfturn::rehearse
