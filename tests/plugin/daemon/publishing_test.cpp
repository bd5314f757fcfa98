// SPDX-License-Identifier: Apache-2.0
// The feed and what is published.
#include "tests/plugin/daemon/running.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::tests;

TEST_CASE("a late listener gets the newest message of each topic, and topics of other drives are not mixed in") {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  for (const auto& [id, drive] : {std::pair("a", "red"), {"b", "red"}, {"c", "red2"}, {"d", "blue"}}) {
    peer.ask_json(fit_request(id, drive));
    REQUIRE(peer.answer().at("kind") == "fitted");
  }
  Listener red(running.endpoints().results, "fitted/red/");
  const auto heard = red.next();
  CHECK(heard.topic == "fitted/red/");
  CHECK(heard.message.at("id") == "b");
  CHECK(heard.message.at("sequence") == 2);
  CHECK(heard.message.at("boot").get<std::string>().size() == 32);
  CHECK(heard.message.contains("published_at"));

  Listener all(running.endpoints().results, "fitted/");
  std::set<std::string> topics;
  for (int i = 0; i < 3; ++i) topics.insert(all.next().topic);
  CHECK(topics == std::set<std::string>{"fitted/red/", "fitted/red2/", "fitted/blue/"});

  // The next one reaches a listener that is there already, numbered on.
  peer.ask_json(fit_request("e"));
  REQUIRE(peer.answer().at("kind") == "fitted");
  auto next = red.next();
  while (next.message.at("sequence") == 2) next = red.next();  // a replay that another subscription caused
  CHECK(next.message.at("sequence") == 3);
  CHECK(next.message.at("id") == "e");
}

TEST_CASE("health is published every second, numbered") {
  Running running;
  Listener listener(running.endpoints().results, "health/");
  const auto first = listener.next();
  auto second = listener.next();
  while (second.message.at("sequence") == first.message.at("sequence")) second = listener.next();
  CHECK(second.message.at("sequence").get<int>() == first.message.at("sequence").get<int>() + 1);
  CHECK(second.message.at("stopping") == false);
  CHECK(second.message.at("boot") == first.message.at("boot"));
}

TEST_CASE("the feed takes scans without answering, and what is wrong with one is published") {
  Running running;
  Listener rejected(running.endpoints().results, "rejected/");
  Listener fitted(running.endpoints().results, "fitted/red/");
  Peer feed(zmq::socket_type::push, running.endpoints().feed);

  feed.send({"no message"});
  CHECK(rejected.next().message.at("code") == "bad_encoding");

  const auto next_rejected = [&](int sequence) {
    auto heard = rejected.next();
    while (heard.message.at("sequence") != sequence) heard = rejected.next();
    return heard.message;
  };
  auto faulty = fit_request("a");
  faulty["scan"]["counts"][3] = 101;  // of 100 shots
  feed.send({packed(faulty)});
  const auto rejection = next_rejected(2);
  CHECK(rejection.at("id") == "a");
  CHECK(rejection.at("where").get<std::string>().find("counts[3]") != std::string::npos);

  feed.send({fit_request("b", "green").dump()});
  CHECK(next_rejected(3).at("code") == "unknown_drive");
  feed.send({status_request("c").dump()});
  CHECK(next_rejected(4).at("code") == "unknown_kind");
  feed.send(Frames(12, "x"));
  CHECK(next_rejected(5).at("code") == "bad_frame");

  feed.send({fit_request("d").dump()});
  CHECK(fitted.next().message.at("id") == "d");
}

TEST_CASE("a feed that brings more than can be fitted loses nothing") {
  Gate gate;
  Running running([&](auto& options) {
    options.limits.in_flight = 3;
    hold_fits(options, gate);
  });
  Listener fitted(running.endpoints().results, "fitted/blue/");
  Peer feed(zmq::socket_type::push, running.endpoints().feed);
  for (int i = 0; i < 40; ++i) feed.send({packed(fit_request("n" + std::to_string(i), "blue"))});
  gate.open_all();
  std::uint64_t last = 0;
  while (last < 40) {
    const auto heard = fitted.next();
    if (heard.message.at("sequence") == last) continue;
    last = heard.message.at("sequence");
    if (last == 40) CHECK(heard.message.at("id") == "n39");
  }
}
