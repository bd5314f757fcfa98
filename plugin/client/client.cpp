// SPDX-License-Identifier: Apache-2.0
#include "plugin/client/client.hpp"

#include <random>
#include <zmq.hpp>

namespace halfturn::client {
namespace {

using Json = nlohmann::json;
using Clock = std::chrono::steady_clock;
using std::chrono::milliseconds;

milliseconds left_until(Clock::time_point end) {
  return std::max(milliseconds(0), std::chrono::ceil<milliseconds>(end - Clock::now()));
}

/// Waits for something to read; a signal that interrupts the waiting does not end it.
bool readable(zmq::socket_t& socket, Clock::time_point end) {
  zmq::pollitem_t item{socket.handle(), 0, ZMQ_POLLIN, 0};
  for (;;) {
    try {
      return zmq::poll(&item, 1, left_until(end)) > 0;
    } catch (const zmq::error_t& problem) {
      if (problem.num() != EINTR) throw;
    }
  }
}

/// All frames of one message.
std::vector<std::string> receive(zmq::socket_t& socket) {
  std::vector<std::string> frames;
  do {
    zmq::message_t frame;
    if (!socket.recv(frame, zmq::recv_flags::dontwait)) break;
    frames.push_back(frame.to_string());
  } while (socket.get(zmq::sockopt::rcvmore));
  return frames;
}

Json parse(const std::string& bytes) {
  if (bytes.starts_with('{')) return Json::parse(bytes, nullptr, false);
  return Json::from_msgpack(bytes.begin(), bytes.end(), true, false);
}

std::string text_in(const Json& message, const char* field) {
  const auto at = message.find(field);
  return at != message.end() && at->is_string() ? at->get<std::string>() : std::string{};
}

Result<Json> result_of(Json reply) {
  if (text_in(reply, "kind") != "error") return reply;
  return fault(text_in(reply, "code"), text_in(reply, "where"), text_in(reply, "message"));
}

}  // namespace

std::string new_id() {
  static thread_local std::random_device source;
  static constexpr char kDigits[] = "0123456789abcdef";
  std::string id = "xxxxxxxx-xxxx-4xxx-yxxx-xxxxxxxxxxxx";
  for (char& c : id) {
    if (c == 'x') c = kDigits[source() % 16];
    if (c == 'y') c = kDigits[8 + source() % 4];
  }
  return id;
}

struct Client::Wire {
  ClientOptions options;
  zmq::context_t context{1};
  std::optional<zmq::socket_t> socket;

  void connect() {
    socket.reset();
    socket.emplace(context, zmq::socket_type::dealer);
    socket->set(zmq::sockopt::linger, 0);
    socket->set(zmq::sockopt::sndtimeo, static_cast<int>(options.timeout.count()));
    socket->connect(options.endpoint);
  }

  /// One attempt: sends and waits for the reply of that id. Nothing where none came in time.
  std::optional<Json> ask(const std::string& bytes, const std::string& id) {
    if (!socket) connect();
    const auto end = Clock::now() + options.timeout;
    if (!socket->send(zmq::buffer(bytes), zmq::send_flags::none)) return std::nullopt;
    while (readable(*socket, end)) {
      const auto frames = receive(*socket);
      if (frames.empty()) continue;
      Json reply = parse(frames.back());
      if (reply.is_object() && text_in(reply, "id") == id) return reply;
    }
    return std::nullopt;
  }
};

Client::Client(ClientOptions options) : wire_(std::make_unique<Wire>()) { wire_->options = std::move(options); }
Client::~Client() = default;
Client::Client(Client&&) noexcept = default;
Client& Client::operator=(Client&&) noexcept = default;

Result<Json> Client::request(const std::string& kind, Json body) {
  body["proto"] = 1;
  body["kind"] = kind;
  if (!body.contains("id")) body["id"] = new_id();
  const std::string id = text_in(body, "id");
  const ClientOptions& options = wire_->options;
  try {
    const auto packed = Json::to_msgpack(body);
    const std::string bytes(packed.begin(), packed.end());
    for (int attempt = 0; attempt < options.attempts; ++attempt) {
      if (auto reply = wire_->ask(bytes, id)) return result_of(std::move(*reply));
      wire_->connect();  // a new socket: the old one may hold what was never sent
    }
  } catch (const zmq::error_t& problem) {
    return fault("bad_endpoint", options.endpoint, std::string("cannot connect: ") + problem.what() +
                 "; expected an endpoint such as tcp://127.0.0.1:7411");
  } catch (const Json::exception& problem) {
    return fault("bad_value", kind, std::string("the request cannot be written: ") + problem.what());
  }
  return fault("no_answer", options.endpoint,
               "found no answer from " + options.endpoint + " in " + std::to_string(options.attempts) + " attempts of " +
                   std::to_string(options.timeout.count()) +
                   " ms; is the daemon running there (halfturn serve)? The request may have arrived: "
                   "repeating it with the id " +
                   id + " is safe");
}

std::optional<std::uint64_t> LossCounter::see(const std::string& topic, const std::string& boot, std::uint64_t sequence) {
  const auto known = last_.find(topic);
  if (known == last_.end() || known->second.first != boot) {
    last_[topic] = {boot, sequence};
    return 0;
  }
  std::uint64_t& last = known->second.second;
  if (sequence <= last) return std::nullopt;
  const std::uint64_t lost = sequence - last - 1;
  last = sequence;
  return lost;
}

struct Subscriber::Wire {
  zmq::context_t context{1};
  zmq::socket_t socket{context, zmq::socket_type::sub};
};

Subscriber::Subscriber(const std::string& endpoint, const std::vector<std::string>& prefixes)
    : wire_(std::make_unique<Wire>()) {
  try {
    wire_->socket.set(zmq::sockopt::linger, 0);
    for (const std::string& prefix : prefixes) wire_->socket.set(zmq::sockopt::subscribe, prefix);
    wire_->socket.connect(endpoint);
  } catch (const zmq::error_t& problem) {
    throw std::runtime_error("cannot connect to " + endpoint + ": " + problem.what());
  }
}

Subscriber::~Subscriber() = default;

std::optional<Publication> Subscriber::next(milliseconds timeout) {
  const auto end = Clock::now() + timeout;
  while (readable(wire_->socket, end)) {
    const auto frames = receive(wire_->socket);
    if (frames.size() != 2) continue;
    Json message = parse(frames[1]);
    const auto sequence = message.is_object() ? message.find("sequence") : message.end();
    if (sequence == message.end() || !sequence->is_number_unsigned()) continue;
    const auto lost = counter_.see(frames[0], text_in(message, "boot"), sequence->get<std::uint64_t>());
    if (!lost) continue;
    lost_ += *lost;
    return Publication{frames[0], std::move(message), *lost};
  }
  return std::nullopt;
}

}  // namespace halfturn::client
