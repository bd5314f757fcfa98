// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <functional>
#include <map>
#include <string>
#include <string_view>

#include "plugin/service/service.hpp"
#include "plugin/wire/encode.hpp"

namespace halfturn::daemon {

/// Numbers what is published, by topic, and keeps the newest message of each topic for those who subscribe later. The topics
/// are bounded by the drives of the configuration.
class Publisher {
 public:
  using Send = std::function<void(std::string_view topic, std::string_view message)>;

  /// `boot` tells this run of the program from others.
  Publisher(std::string boot, const service::Clock& clock, Send send);

  /// A body is any that wire::encode_published takes.
  template <class Body>
  void publish(const std::string& topic, const Body& body) {
    auto& newest = topics_[topic];
    newest.message = wire::encode_published({boot_, ++newest.sequence, clock_.now()}, body);
    send_(topic, newest.message);
  }

  void publish(const service::Publication& publication) {
    std::visit([&](const auto& body) { publish(publication.topic, body); }, publication.body);
  }

  /// Sends the newest message of every topic that begins with `prefix` once more.
  void replay(std::string_view prefix) const;

 private:
  struct Newest {
    std::uint64_t sequence = 0;
    std::string message;
  };

  std::string boot_;
  const service::Clock& clock_;
  Send send_;
  std::map<std::string, Newest> topics_;
};

/// 128 random bits in hexadecimal.
std::string new_boot();

}  // namespace halfturn::daemon
