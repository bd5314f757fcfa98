// SPDX-License-Identifier: Apache-2.0
// The daemon's part is played by a bare ROUTER or PUB socket on an ephemeral port of the loopback.
#include "plugin/client/client.hpp"

#include <set>
#include <thread>
#include <zmq.hpp>

#include "tests/support/catch.hpp"

using namespace halfturn;
using client::Client;
using client::ClientOptions;
using nlohmann::json;
using std::chrono::milliseconds;

namespace {

std::string packed(const json& message) {
  const auto bytes = json::to_msgpack(message);
  return {bytes.begin(), bytes.end()};
}

/// A ROUTER that hands each request (peer, message) to a function, which sends what it likes; at most `count` requests, and
/// no longer than 20 s for each.
class Peer {
 public:
  using Answer = std::function<void(zmq::socket_t&, const std::string& peer, const json& request)>;
  Peer(int count, Answer answer) : router_(context_, zmq::socket_type::router) {
    router_.set(zmq::sockopt::linger, 0);
    router_.set(zmq::sockopt::rcvtimeo, 20'000);
    router_.bind("tcp://127.0.0.1:*");
    endpoint = router_.get(zmq::sockopt::last_endpoint);
    thread_ = std::thread([this, count, answer] {
      for (int i = 0; i < count; ++i) {
        zmq::message_t peer, body;
        if (!router_.recv(peer) || !router_.recv(body)) return;
        const std::string bytes = body.to_string();
        requests.push_back(json::from_msgpack(bytes.begin(), bytes.end()));
        answer(router_, peer.to_string(), requests.back());
      }
    });
  }
  ~Peer() { join(); }
  void join() {
    if (thread_.joinable()) thread_.join();
  }
  std::string endpoint;
  std::vector<json> requests;

 private:
  zmq::context_t context_{1};
  zmq::socket_t router_;
  std::thread thread_;
};

void send(zmq::socket_t& router, const std::string& peer, const json& message) {
  router.send(zmq::buffer(peer), zmq::send_flags::sndmore);
  router.send(zmq::buffer(packed(message)), zmq::send_flags::none);
}

}  // namespace

TEST_CASE("a reply is matched by its id and stale ones are dropped") {
  Peer peer(1, [](auto& router, const auto& from, const json& request) {
    send(router, from, {{"proto", 1}, {"kind", "noted"}, {"id", "somebody-else"}});
    send(router, from, {{"proto", 1}, {"kind", "state"}, {"id", request["id"]}, {"version", "x"}});
  });
  Client client(peer.endpoint, milliseconds(10'000));
  const auto reply = client.request("status");
  REQUIRE(reply);
  CHECK((*reply)["version"] == "x");
  peer.join();
  CHECK(peer.requests[0]["proto"] == 1);
  CHECK(peer.requests[0]["kind"] == "status");
}

TEST_CASE("a request without a reply is repeated with the same id") {
  Peer peer(2, [n = 0](auto& router, const auto& from, const json& request) mutable {
    if (++n == 2) send(router, from, {{"proto", 1}, {"kind", "noted"}, {"id", request["id"]}, {"replayed", true}});
  });
  Client client(ClientOptions{peer.endpoint, milliseconds(300), 10});
  REQUIRE(client.request("release", {{"drive", "red"}, {"by", "Ada"}}));
  peer.join();
  CHECK(peer.requests[0] == peer.requests[1]);
}

TEST_CASE("an error is a fault with its code, place and message") {
  Peer peer(1, [](auto& router, const auto& from, const json& request) {
    send(router, from,
         {{"kind", "error"},
          {"id", request["id"]},
          {"code", "unknown_drive"},
          {"where", "drive"},
          {"message", "found \"rad\""}});
  });
  Client client(peer.endpoint, milliseconds(10'000));
  const auto reply = client.request("history", {{"drive", "rad"}});
  REQUIRE_FALSE(reply);
  CHECK(reply.error().code == "unknown_drive");
  CHECK(reply.error().where == "drive");
}

TEST_CASE("nobody there, and no endpoint") {
  zmq::context_t context{1};
  zmq::socket_t silent(context, zmq::socket_type::router);
  silent.set(zmq::sockopt::linger, 0);
  silent.bind("tcp://127.0.0.1:*");
  Client client(ClientOptions{silent.get(zmq::sockopt::last_endpoint), milliseconds(20), 2});
  CHECK(client.request("status").error().code == "no_answer");
  CHECK(Client("nowhere", milliseconds(20)).request("status").error().code == "bad_endpoint");
}

TEST_CASE("losses are counted per topic and boot, repeats ignored") {
  client::LossCounter counter;
  CHECK(counter.see("fitted/red/", "b1", 5) == 0u);  // a late subscriber begins anywhere
  CHECK(counter.see("fitted/red/", "b1", 5) == std::nullopt);
  CHECK(counter.see("fitted/red/", "b1", 9) == 3u);
  CHECK(counter.see("fitted/blue/", "b1", 2) == 0u);
  CHECK(counter.see("fitted/red/", "b2", 1) == 0u);
  CHECK(counter.see("fitted/red/", "b2", 2) == 0u);
}

TEST_CASE("a subscriber receives its topics") {
  zmq::context_t context{1};
  zmq::socket_t pub(context, zmq::socket_type::xpub);
  pub.set(zmq::sockopt::linger, 0);
  pub.set(zmq::sockopt::rcvtimeo, 20'000);
  pub.bind("tcp://127.0.0.1:*");
  client::Subscriber subscriber(pub.get(zmq::sockopt::last_endpoint), {"fitted/red/"});
  zmq::message_t subscription;
  REQUIRE(pub.recv(subscription));  // readiness: the subscription has arrived
  for (const auto& [topic, sequence] : {std::pair("fitted/red2/", 1), std::pair("fitted/red/", 1),
                                        std::pair("fitted/red/", 1), std::pair("fitted/red/", 4)}) {
    pub.send(zmq::buffer(std::string(topic)), zmq::send_flags::sndmore);
    pub.send(zmq::buffer(packed({{"boot", "b"}, {"sequence", sequence}, {"kind", "fitted"}})), zmq::send_flags::none);
  }
  const auto first = subscriber.next(milliseconds(20'000));
  REQUIRE(first);
  CHECK(first->topic == "fitted/red/");
  CHECK(first->lost == 0);
  const auto second = subscriber.next(milliseconds(20'000));
  REQUIRE(second);
  CHECK(second->message["sequence"] == 4);
  CHECK(second->lost == 2);
  CHECK(subscriber.lost() == 2);
  CHECK_FALSE(subscriber.next(milliseconds(0)));
}

TEST_CASE("ids are UUIDs that differ") {
  std::set<std::string> seen;
  for (int i = 0; i < 1000; ++i) seen.insert(client::new_id());
  CHECK(seen.size() == 1000);
  CHECK(seen.begin()->size() == 36);
  CHECK((*seen.begin())[14] == '4');
}
