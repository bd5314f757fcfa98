// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <chrono>
#include <cstdint>
#include <functional>
#include <map>
#include <memory>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "model/quantity/result.hpp"

/// Programs that talk to the daemon. No object here may be used by two threads at once.
namespace halfturn::client {

struct ClientOptions {
  std::string endpoint = "tcp://127.0.0.1:7411";
  std::chrono::milliseconds timeout{5000};  // for one attempt
  int attempts = 3;                         // each with the same id, so that a repeat changes nothing
};

/// Sends requests and waits for their replies, matched by `id`; replies to requests that were given up are dropped.
class Client {
 public:
  explicit Client(ClientOptions options);
  Client(const std::string& endpoint, std::chrono::milliseconds timeout) : Client(ClientOptions{endpoint, timeout, 3}) {}
  ~Client();
  Client(Client&&) noexcept;
  Client& operator=(Client&&) noexcept;

  /// Sends `body` (the request's fields apart from `proto`, `kind` and `id`) as one request and returns the reply. A reply
  /// `error` is a Fault with its code, place and message. Without a reply in all attempts the Fault is `no_answer`; an
  /// endpoint that is none is `bad_endpoint`. An `id` may be given in the body; otherwise each call has a new one.
  Result<nlohmann::json> request(const std::string& kind, nlohmann::json body = nlohmann::json::object());

 private:
  struct Wire;
  std::unique_ptr<Wire> wire_;
};

/// A random UUID (RFC 9562, version 4).
std::string new_id();

/// A published message, with what was lost before it on its topic.
struct Publication {
  std::string topic;
  nlohmann::json message;
  std::uint64_t lost = 0;
};

/// Counts what is lost per topic from `boot` and `sequence`.
class LossCounter {
 public:
  /// The messages lost on this topic just before this one; nothing where it was seen already. A new `boot` starts anew.
  std::optional<std::uint64_t> see(const std::string& topic, const std::string& boot, std::uint64_t sequence);

 private:
  std::map<std::string, std::pair<std::string, std::uint64_t>> last_;
};

/// Receives published messages of the topics that begin with one of the prefixes (`fitted/red/`).
class Subscriber {
 public:
  /// Throws std::runtime_error where the endpoint is none.
  explicit Subscriber(const std::string& endpoint, const std::vector<std::string>& prefixes = {""});
  ~Subscriber();

  /// The next message that was not seen before; nothing where none comes in time.
  std::optional<Publication> next(std::chrono::milliseconds timeout);

  std::uint64_t lost() const { return lost_; }  // of all topics since the start

 private:
  struct Wire;
  std::unique_ptr<Wire> wire_;
  LossCounter counter_;
  std::uint64_t lost_ = 0;
};

}  // namespace halfturn::client
