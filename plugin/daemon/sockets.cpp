// SPDX-License-Identifier: Apache-2.0
#include "plugin/daemon/sockets.hpp"

#include <cerrno>
#include <chrono>
#include <utility>

namespace halfturn::daemon {

namespace {

constexpr std::size_t kEnvelopeFrames = 8;  // that a peer may put before its message

/// Calls a ZeroMQ operation again for as long as a signal interrupts it.
template <class Operation>
auto uninterrupted(Operation operation) {
  for (;;) {
    try {
      return operation();
    } catch (const zmq::error_t& error) {
      if (error.num() != EINTR) throw;
    }
  }
}

void set_common(zmq::socket_t& socket) {
  socket.set(zmq::sockopt::linger, 1000);              // ms: replies on their way may leave, a dead peer does not hold the exit
  socket.set(zmq::sockopt::heartbeat_ivl, 5000);       // ms; finds peers that vanished without a word
  socket.set(zmq::sockopt::heartbeat_timeout, 15000);  // ms
  socket.set(zmq::sockopt::sndhwm, 1000);
  socket.set(zmq::sockopt::rcvhwm, 1000);
}

std::string why_not(int error, const std::string& endpoint, const std::string& key) {
  switch (error) {
    case EADDRINUSE:
      return endpoint + " is in use, perhaps by a Halfturn that runs already: stop that program, or give " + key +
             " another endpoint";
    case EADDRNOTAVAIL:
    case ENODEV:
      return endpoint + " is no address of this machine: give " + key + " one that it has, such as tcp://127.0.0.1:7411";
    case EACCES:
      return endpoint + " may not be opened by this user: give " + key + " a port of 1024 or above";
    default:
      return endpoint + " cannot be opened (" + zmq_strerror(error) + "): " + key +
             " must be an endpoint such as tcp://127.0.0.1:7411";
  }
}

Result<std::string> bind_to(zmq::socket_t& socket, const std::string& endpoint, const std::string& key) {
  try {
    socket.set(zmq::sockopt::ipv6, endpoint.find('[') != std::string::npos);
    socket.bind(endpoint);
    return socket.get(zmq::sockopt::last_endpoint);
  } catch (const zmq::error_t& error) {
    return fault("not_available", key, why_not(error.num(), endpoint, key));
  }
}

Fault too_many_frames() {
  return {"bad_frame", "", "found more than " + std::to_string(kEnvelopeFrames) +
                               " frames before the message, expected at most " + std::to_string(kEnvelopeFrames)};
}

Fault too_many_bytes(std::size_t found, std::int64_t allowed) {
  return {"too_large", "", "found a message of " + std::to_string(found) + " bytes, expected at most " +
                               std::to_string(allowed) + ": send fewer points or sites at a time"};
}

}  // namespace

Sockets::Sockets(std::int64_t largest_message)
    : largest_message_(largest_message),
      context_(1),
      requests_(context_, zmq::socket_type::router),
      feed_(context_, zmq::socket_type::pull),
      results_(context_, zmq::socket_type::xpub) {
  for (auto* socket : {&requests_, &feed_, &results_}) set_common(*socket);
  // A frame above the limit is answered `too_large`; one above twice the limit breaks its connection before it is read.
  for (auto* socket : {&requests_, &feed_}) socket->set(zmq::sockopt::maxmsgsize, 2 * largest_message);
  results_.set(zmq::sockopt::maxmsgsize, std::int64_t{4096});  // subscriptions alone
  results_.set(zmq::sockopt::xpub_verbose, true);
  requests_.set(zmq::sockopt::router_mandatory, true);  // tells of peers that are gone
  requests_.set(zmq::sockopt::router_handover, true);   // a peer that comes back under its old name takes its place
}

Result<std::unique_ptr<Sockets>> Sockets::open(const config::Sockets& addresses, std::int64_t largest_message) {
  std::unique_ptr<Sockets> sockets(new Sockets(largest_message));
  const auto requests = bind_to(sockets->requests_, addresses.requests, "sockets.requests");
  if (!requests) return tl::unexpected(requests.error());
  const auto feed = bind_to(sockets->feed_, addresses.feed, "sockets.feed");
  if (!feed) return tl::unexpected(feed.error());
  const auto results = bind_to(sockets->results_, addresses.results, "sockets.results");
  if (!results) return tl::unexpected(results.error());
  sockets->endpoints_ = {*requests, *feed, *results};
  return sockets;
}

std::optional<Incoming> Sockets::take(zmq::socket_t& socket, std::size_t own_frames) {
  Incoming incoming;
  std::size_t bytes = 0;
  bool more = true;
  for (std::size_t frames = 0; more; ++frames) {
    const auto size = uninterrupted([&] { return socket.recv(incoming.message, zmq::recv_flags::dontwait); });
    if (!size) return std::nullopt;  // nothing waits; once a first frame is here, the others are too
    more = incoming.message.more();
    bytes += frames < own_frames ? 0 : *size;
    if (more && frames < own_frames + kEnvelopeFrames && bytes <= static_cast<std::size_t>(largest_message_))
      incoming.envelope.push_back(incoming.message.to_string());
    else if (more || frames > own_frames + kEnvelopeFrames)
      incoming.fault = too_many_frames();
  }
  if (bytes > static_cast<std::size_t>(largest_message_)) {
    incoming.fault = too_many_bytes(bytes, largest_message_);
  } else if (incoming.envelope.size() < own_frames) {
    incoming.fault = Fault{"bad_frame", "", "found no message behind the peer's identity"};
  }
  return incoming;
}

std::optional<std::string> Sockets::take_subscription() {
  zmq::message_t message;
  while (uninterrupted([&] { return results_.recv(message, zmq::recv_flags::dontwait); })) {
    const auto text = message.to_string_view();
    if (!text.empty() && text.front() == '\1') return std::string(text.substr(1));
  }
  return std::nullopt;
}

bool Sockets::reply(const std::vector<std::string>& envelope, std::string_view message) {
  try {
    for (const auto& frame : envelope) {
      const auto flags = zmq::send_flags::sndmore | zmq::send_flags::dontwait;
      if (!uninterrupted([&] { return requests_.send(zmq::buffer(frame), flags); })) return false;
    }
    return uninterrupted([&] { return requests_.send(zmq::buffer(message), zmq::send_flags::dontwait); }).has_value();
  } catch (const zmq::error_t& error) {
    if (error.num() != EHOSTUNREACH) throw;
    return false;
  }
}

void Sockets::publish(std::string_view topic, std::string_view message) {
  uninterrupted([&] { return results_.send(zmq::buffer(topic), zmq::send_flags::sndmore | zmq::send_flags::dontwait); });
  uninterrupted([&] { return results_.send(zmq::buffer(message), zmq::send_flags::dontwait); });
}

void Sockets::close_feed() {
  try {
    feed_.unbind(endpoints_.feed);
  } catch (const zmq::error_t&) {  // it was not bound any more
  }
}

void wait_for(std::vector<zmq::pollitem_t>& items, std::int64_t timeout_ms) {
  try {
    zmq::poll(items, std::chrono::milliseconds(timeout_ms));
  } catch (const zmq::error_t& error) {
    if (error.num() != EINTR) throw;
  }
}

}  // namespace halfturn::daemon
