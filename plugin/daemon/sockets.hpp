// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <vector>
#include <zmq.hpp>

#include "model/quantity/result.hpp"
#include "plugin/config/configuration.hpp"

namespace halfturn::daemon {

/// The addresses as bound, with the port that the system chose where the configuration left it open (`tcp://127.0.0.1:*`).
struct Endpoints {
  std::string requests, feed, results;
};

/// A message as it came: the frames before the last (the peer's identity first, on a ROUTER), and the last.
struct Incoming {
  std::vector<std::string> envelope;
  zmq::message_t message;
  std::optional<Fault> fault;  // bad_frame or too_large; the envelope then holds its first frames, as many as are allowed

  std::string_view text() const { return message.to_string_view(); }
};

/// The three ZeroMQ sockets. They belong to the thread that calls these functions; none of them ever waits.
class Sockets {
 public:
  /// Binds them. `largest_message` in bytes. An endpoint that cannot be bound is a Fault whose `where` is the
  /// configuration's key.
  static Result<std::unique_ptr<Sockets>> open(const config::Sockets& addresses, std::int64_t largest_message);

  const Endpoints& endpoints() const { return endpoints_; }
  zmq::socket_t& requests() { return requests_; }
  zmq::socket_t& feed() { return feed_; }
  zmq::socket_t& results() { return results_; }

  /// The next message that waits, if any.
  std::optional<Incoming> take_request() { return take(requests_, 1); }
  std::optional<Incoming> take_feed() { return take(feed_, 0); }

  /// The topic of a new subscription, if one waits; those that end are passed over.
  std::optional<std::string> take_subscription();

  /// False where the peer is gone or takes nothing more.
  bool reply(const std::vector<std::string>& envelope, std::string_view message);

  /// Published to those who listen; slow ones lose it.
  void publish(std::string_view topic, std::string_view message);

  /// New peers are turned away from the feed from now on.
  void close_feed();

 private:
  explicit Sockets(std::int64_t largest_message);
  std::optional<Incoming> take(zmq::socket_t& socket, std::size_t own_frames);

  std::int64_t largest_message_;
  zmq::context_t context_;
  zmq::socket_t requests_, feed_, results_;
  Endpoints endpoints_;
};

/// Waits until one of `items` is ready, at most `timeout_ms`; a signal that interrupts the wait ends it.
void wait_for(std::vector<zmq::pollitem_t>& items, std::int64_t timeout_ms);

}  // namespace halfturn::daemon
