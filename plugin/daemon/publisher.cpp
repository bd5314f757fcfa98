// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/publisher.hpp"

#include <random>
#include <utility>

namespace halfturn::daemon {

Publisher::Publisher(std::string boot, const service::Clock& clock, Send send)
    : boot_(std::move(boot)), clock_(clock), send_(std::move(send)) {}

void Publisher::replay(std::string_view prefix) const {
  for (const auto& [topic, newest] : topics_)
    if (std::string_view(topic).substr(0, prefix.size()) == prefix) send_(topic, newest.message);
}

std::string new_boot() {
  constexpr std::string_view kDigits = "0123456789abcdef";
  std::random_device random;
  std::string boot;
  for (int i = 0; i < 32; ++i) boot += kDigits[random() % 16];
  return boot;
}

}  // namespace halfturn::daemon
