// SPDX-License-Identifier: Apache-2.0
// The order in which requests are decided, and how many are let in.
#include "plugin/daemon/order.hpp"

#include <algorithm>
#include <map>
#include <random>

#include "tests/plugin/daemon/running.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::tests;
using halfturn::daemon::Job;
using halfturn::daemon::Order;

namespace {

std::shared_ptr<Job> job(const std::string& drive) {
  auto made = std::make_shared<Job>();
  made->task.drive = drive;
  return made;
}

}  // namespace

TEST_CASE("jobs of a drive leave in their order however fits finish, and no other drive waits") {
  std::mt19937 random(7);
  for (int round = 0; round < 200; ++round) {
    Order order;
    std::vector<std::shared_ptr<Job>> waiting, added, left;
    for (int i = 0; i < 30; ++i) {
      added.push_back(job(std::string(1, static_cast<char>('a' + random() % 3))));
      const bool ready = random() % 4 == 0;
      order.add(added.back(), ready);
      if (!ready) waiting.push_back(added.back());
    }
    std::shuffle(waiting.begin(), waiting.end(), random);
    // What may leave, worked out from the definition: ready, and no earlier one of the drive is not.
    const auto may_leave = [&](std::size_t i) {
      for (std::size_t k = 0; k <= i; ++k)
        if (added[k]->task.drive == added[i]->task.drive && !added[k]->ready) return false;
      return true;
    };
    for (std::size_t done = 0; done <= waiting.size(); ++done) {
      if (done > 0) order.fitted(*waiting[done - 1]);
      std::size_t expected = 0;
      for (std::size_t i = 0; i < added.size(); ++i) expected += may_leave(i) ? 1 : 0;
      if (expected == left.size()) continue;
      const auto group = order.wait();
      CHECK(std::is_sorted(group.begin(), group.end(), [](auto& a, auto& b) { return a->number < b->number; }));
      left.insert(left.end(), group.begin(), group.end());
      REQUIRE(left.size() == expected);
    }
    REQUIRE(left.size() == added.size());
    std::map<std::string, std::uint64_t> newest;
    for (const auto& each : left) {
      CHECK(newest[each->task.drive] < each->number);
      newest[each->task.drive] = each->number;
    }
  }
}

TEST_CASE("a closed order gives back what stood in line and lets nobody wait") {
  Order order;
  order.add(job("a"), false);
  order.add(job("b"), false);
  bool empty = false;
  std::thread waiter([&] { empty = order.wait().empty(); });
  CHECK(order.close().size() == 2);
  waiter.join();
  CHECK(empty);
  CHECK(order.wait().empty());
}

TEST_CASE("many workers: each drive is decided in order of arrival, the other does not wait for it") {
  Gate gate;
  Running running([&](auto& options) {
    options.threads = 4;
    hold_fits(options, gate);
  });
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  constexpr int kEach = 12;
  // The first of red holds all of red back; blue is let through, and then red in a wild order.
  peer.ask_json(fit_request("red-00"));
  for (int i = 0; i < kEach; ++i) peer.ask_json(fit_request("blue-" + std::to_string(10 + i), "blue"));
  for (int i = 0; i < kEach; ++i) gate.open("blue-" + std::to_string(10 + i));
  for (int i = 0; i < kEach; ++i) CHECK(peer.answer().at("id") == "blue-" + std::to_string(10 + i));

  std::vector<std::string> red = {"red-00"};
  for (int i = 10; i < 10 + kEach; ++i) red.push_back("red-" + std::to_string(i));
  for (std::size_t i = 1; i < red.size(); ++i) peer.ask_json(fit_request(red[i]));
  auto shuffled = red;
  std::shuffle(shuffled.begin(), shuffled.end(), std::mt19937(3));
  for (const auto& name : shuffled) gate.open(name);
  for (const auto& name : red) CHECK(peer.answer().at("id") == name);
}

TEST_CASE("above the limit of requests in flight the answer is busy, with a time to wait; status is always answered") {
  Gate gate;
  Running running([&](auto& options) {
    options.limits.in_flight = 2;
    hold_fits(options, gate);
  });
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  for (const char* id : {"a", "b", "c"}) peer.ask_json(fit_request(id));
  const auto busy = peer.answer();
  CHECK(busy.at("id") == "c");
  CHECK(busy.at("code") == "busy");
  CHECK(busy.at("retry_after_s").get<double>() > 0.0);
  peer.ask_json(status_request("s"));
  CHECK(peer.answer().at("id") == "s");

  gate.open_all();
  CHECK(peer.answer().at("id") == "a");
  CHECK(peer.answer().at("id") == "b");
  peer.ask_json(fit_request("c"));
  CHECK(peer.answer().at("kind") == "fitted");
}

TEST_CASE("a fit that breaks is answered as internal and the next one is served") {
  Running running([](auto& options) {
    options.fit = [](auto& task) {
      if (task.request.id == "a") throw std::bad_alloc();
      halfturn::service::Service::fit(task);
    };
  });
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  peer.ask_json(fit_request("a"));
  const auto broken = peer.answer();
  CHECK(broken.at("id") == "a");
  CHECK(broken.at("code") == "internal");
  peer.ask_json(fit_request("b"));
  CHECK(peer.answer().at("kind") == "fitted");
}
