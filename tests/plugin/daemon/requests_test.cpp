// SPDX-License-Identifier: Apache-2.0
// Requests and replies: peers of both kinds, both encodings, envelopes, and what is too large or no message at all.
#include <atomic>
#include <map>
#include <random>

#include "plugin/service/service.hpp"
#include "tests/plugin/daemon/running.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::tests;

TEST_CASE("a REQ peer is answered in the encoding that it used") {
  Running running;
  Peer peer(zmq::socket_type::req, running.endpoints().requests);

  peer.send({status_request("s1").dump()});
  auto reply = peer.receive();
  REQUIRE(reply.size() == 1);
  CHECK(reply[0].front() == '{');
  CHECK(json::parse(reply[0]).at("id") == "s1");
  CHECK(json::parse(reply[0]).at("kind") == "state");

  peer.send({packed(status_request("s2"))});
  reply = peer.receive();
  CHECK(reply[0].front() != '{');
  CHECK(json::from_msgpack(reply[0]).at("id") == "s2");
}

TEST_CASE("a fit is answered and found again under its id") {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  peer.ask_json(fit_request("a"));
  const auto first = peer.answer();
  CHECK(first.at("kind") == "fitted");
  CHECK(first.at("id") == "a");
  CHECK(first.at("drive") == "red");

  peer.send({packed(fit_request("a"))});
  const auto again = peer.answer();
  CHECK(again.at("replayed") == true);
  CHECK(again.at("verdict") == first.at("verdict"));

  peer.ask_json(fit_request("a", "blue"));
  CHECK(peer.answer().at("code") == "id_reused");
}

TEST_CASE("up to eight frames before the message come back unchanged, a ninth is a fault") {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  Frames envelope;
  for (std::size_t size = 0; size <= 8; ++size) {
    auto frames = envelope;
    frames.push_back(status_request("s").dump());
    peer.send(frames);
    const auto reply = peer.receive();
    REQUIRE(reply.size() == size + 1);
    CHECK(Frames(reply.begin(), reply.end() - 1) == envelope);
    CHECK(Peer::decoded(reply.back()).at("kind") == "state");
    // An empty frame as REQ peers put it, then bytes of every kind.
    envelope.push_back(size == 0 ? std::string() : std::string("\0{\xff", 3) + std::to_string(size));
  }
  REQUIRE(envelope.size() == 9);
  envelope.push_back(status_request("s").dump());
  peer.send(envelope);
  CHECK(peer.answer().at("code") == "bad_frame");

  peer.send(Frames(500, "x"));
  CHECK(peer.answer().at("code") == "bad_frame");
}

// A request that was sent again while its fit was at work was fitted again from the start, each time.
TEST_CASE("a request that comes again while it is worked on is fitted once and answered to all who sent it") {
  Gate gate;
  std::atomic<int> fits = 0;
  Running running([&](auto& options) {
    options.fit = [&](halfturn::service::Task& task) {
      ++fits;
      gate.wait(task.request.scans.front().scan_name);
      halfturn::service::Service::fit(task);
    };
    options.limits.in_flight = 2;
  });
  Peer first(zmq::socket_type::dealer, running.endpoints().requests);
  Peer again(zmq::socket_type::dealer, running.endpoints().requests);
  first.ask_json(fit_request("a"));
  gate.wait_for_arrival("a");
  again.send({packed(fit_request("a"))});
  again.ask_json(fit_request("a"));
  {
    Peer gone(zmq::socket_type::dealer, running.endpoints().requests);
    gone.ask_json(fit_request("a"));
    gone.ask_json(status_request("s"));
    CHECK(gone.answer().at("kind") == "state");
  }
  auto other = fit_request("a");
  other["scan"]["scan_name"] = "b";
  again.ask_json(other);  // of the same id and of other content
  again.ask_json(status_request("s"));
  CHECK(again.answer().at("kind") == "state");  // so the requests before it have been taken
  gate.open_all();

  const auto reply = first.answer();
  CHECK(reply.at("kind") == "fitted");
  CHECK_FALSE(reply.value("replayed", false));
  std::map<std::string, int> kinds;
  for (int i = 0; i < 3; ++i) {
    const auto repeated = again.answer();
    ++kinds[repeated.at("kind")];
    CHECK(repeated.at("id") == "a");
    if (repeated.at("kind") == "error") CHECK(repeated.at("code") == "id_reused");
    else CHECK(repeated.at("replayed") == true);
  }
  CHECK(kinds["fitted"] == 2);
  CHECK(kinds["error"] == 1);
  CHECK(fits == 2);
  CHECK(running.stop() == 0);
  CHECK(running.daemon().in_flight() == 0);
}

TEST_CASE("a message above the limit is answered, one far above it costs its peer the connection") {
  Running running([](auto& options) { options.limits.bytes = 20'000; });
  const auto& endpoint = running.endpoints().requests;

  Peer large(zmq::socket_type::req, endpoint);
  large.send({"{" + std::string(20'000, ' ')});
  CHECK(large.answer().at("code") == "too_large");

  Peer divided(zmq::socket_type::dealer, endpoint);
  divided.send({std::string(15'000, 'a'), std::string(15'000, 'b'), status_request("s").dump()});
  CHECK(divided.answer().at("code") == "too_large");

  Peer huge(zmq::socket_type::dealer, endpoint);
  huge.send({std::string(200'000, ' ')});
  Peer other(zmq::socket_type::req, endpoint);
  other.ask_json(status_request("s"));
  const auto state = other.answer();
  CHECK(state.at("limits").at("bytes") == 20'000);
}

TEST_CASE("bytes that are no message are answered by a fault, and the daemon goes on") {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  std::mt19937 random(20260203);
  for (int i = 0; i < 500; ++i) {
    std::string bytes(random() % 60, '\0');
    for (auto& byte : bytes) byte = static_cast<char>(random());
    if (i % 2 == 0) bytes = "{" + bytes;
    peer.send({bytes});
    const auto reply = peer.answer();
    CHECK(reply.at("kind") == "error");
    CHECK(!reply.at("message").get<std::string>().empty());
  }
  peer.ask_json(status_request("s"));
  CHECK(peer.answer().at("kind") == "state");
}

TEST_CASE("what is asked of an unknown drive or in an unknown form is answered by a fault with the id") {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  peer.ask_json(fit_request("a", "green"));
  auto reply = peer.answer();
  CHECK(reply.at("code") == "unknown_drive");
  CHECK(reply.at("id") == "a");

  auto request = fit_request("b");
  request["sacn"] = 1;
  peer.ask_json(request);
  reply = peer.answer();
  CHECK(reply.at("code") == "unknown_field");
  CHECK(reply.at("id") == "b");
}

TEST_CASE("an endpoint in use is a fault that names it and the key of the configuration") {
  Running running;
  auto taken = configuration();
  const auto endpoint = running.endpoints().requests;
  taken->sockets.requests = endpoint;
  auto sockets = halfturn::daemon::Sockets::open(taken->sockets, 1 << 20);
  REQUIRE(!sockets);
  CHECK(sockets.error().where == "sockets.requests");
  CHECK(sockets.error().message.find(endpoint) != std::string::npos);
  CHECK(sockets.error().message.find("in use") != std::string::npos);
}

TEST_CASE("endpoints may be IPv6") {
  auto addresses = configuration()->sockets;
  addresses.requests = "tcp://[::1]:*";
  const auto sockets = halfturn::daemon::Sockets::open(addresses, 1 << 20);
  if (!sockets) {
    WARN("skipped: this machine has no IPv6 loopback");
    return;
  }
  const auto endpoint = (*sockets)->endpoints().requests;
  CHECK(endpoint.find("[::1]:") != std::string::npos);
}
