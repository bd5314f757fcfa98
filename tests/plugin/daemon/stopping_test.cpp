// SPDX-License-Identifier: Apache-2.0
// How the daemon stops, and how it takes a new configuration.
#include <atomic>
#include <csignal>

#include "plugin/log/memory_log.hpp"
#include "tests/plugin/daemon/running.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::tests;
using namespace halfturn::log;
using halfturn::Result;
using halfturn::config::Reading;

namespace {

/// The state once `wanted` holds of it.
json state_with(Peer& peer, const std::function<bool(const json&)>& wanted) {
  const auto until = std::chrono::steady_clock::now() + kPatience;
  for (int i = 0; std::chrono::steady_clock::now() < until; ++i) {
    peer.ask_json(status_request("state-" + std::to_string(i)));
    const auto state = peer.answer();
    if (wanted(state)) return state;
  }
  FAIL("the state did not become as wanted");
  return {};
}

bool troubled(const json& state, const std::string& word) {
  for (const auto& trouble : state.at("troubles"))
    if (trouble.get<std::string>().find(word) != std::string::npos) return true;
  return false;
}

/// A log in memory that counts its commits; all but the first wait at a gate where one is given.
class WatchedLog : public Log {
 public:
  explicit WatchedLog(std::atomic<int>& commits, Gate* gate = nullptr) : commits_(commits), gate_(gate) {}
  Result<void> begin() override { return log_.begin(); }
  Result<void> commit() override {
    if (gate_ != nullptr && commits_ > 0) gate_->wait("commit");
    auto done = log_.commit();
    ++commits_;
    return done;
  }
  void roll_back() override { log_.roll_back(); }
  Result<std::int64_t> append(const Event& event, const Bulk* bulk) override { return log_.append(event, bulk); }
  Result<void> keep_reply(const std::string& id, const StoredReply& reply, Time now) override { return log_.keep_reply(id, reply, now); }
  Result<std::optional<StoredReply>> find_reply(const std::string& id) override { return log_.find_reply(id); }
  Result<void> forget_replies(Time before) override { return log_.forget_replies(before); }
  Result<void> keep_configuration(const std::string& fingerprint, const std::string& text, Time now) override {
    return log_.keep_configuration(fingerprint, text, now);
  }
  Result<void> replay(const std::function<void(const Event&)>& visit) override { return log_.replay(visit); }
  Result<std::vector<Row>> history(const Range& range) override { return log_.history(range); }
  Result<std::vector<Event>> events(const Range& range) override { return log_.events(range); }
  Result<std::optional<std::string>> scan(std::int64_t number) override { return log_.scan(number); }

 private:
  MemoryLog log_;
  std::atomic<int>& commits_;
  Gate* gate_;
};

}  // namespace

TEST_CASE("while stopping, what was accepted is answered and what comes is turned away") {
  Gate gate;
  Running running([&](auto& options) { hold_fits(options, gate); });
  Peer worker(zmq::socket_type::dealer, running.endpoints().requests);
  Peer asker(zmq::socket_type::req, running.endpoints().requests);
  Listener health(running.endpoints().results, "health/");
  worker.ask_json(fit_request("a"));
  gate.wait_for_arrival("a");

  running.daemon().stop();
  state_with(asker, [](const json& state) { return state.at("stopping") == true; });
  asker.ask_json(fit_request("b"));
  CHECK(asker.answer().at("code") == "stopping");
  auto heard = health.next();
  while (heard.message.at("stopping") != true) heard = health.next();

  gate.open_all();
  const auto reply = worker.answer();
  CHECK(reply.at("id") == "a");
  CHECK(reply.at("kind") == "fitted");
  CHECK(running.wait() == 0);
  CHECK(running.daemon().in_flight() == 0);
}

TEST_CASE("a fit that outlasts the time to stop is answered `stopping`") {
  Gate gate;
  Running running([&](auto& options) {
    hold_fits(options, gate);
    options.stop_within = std::chrono::milliseconds(50);
  });
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  peer.ask_json(fit_request("a"));
  gate.wait_for_arrival("a");
  CHECK(running.stop() == 0);
  CHECK(running.daemon().in_flight() == 1);
  const auto reply = peer.answer();
  CHECK(reply.at("id") == "a");
  CHECK(reply.at("code") == "stopping");
  gate.open_all();
}

// Scans that had come by the feed and were not decided in time vanished without a word.
TEST_CASE("a scan of the feed that outlasts the time to stop is published as rejected") {
  Gate gate;
  Running running([&](auto& options) {
    hold_fits(options, gate);
    options.stop_within = std::chrono::milliseconds(50);
  });
  Listener all(running.endpoints().results, "");
  Peer feed(zmq::socket_type::push, running.endpoints().feed);
  all.next();  // the health of this second: the listener is there
  feed.send({fit_request("a").dump()});
  gate.wait_for_arrival("a");
  CHECK(running.stop() == 0);
  auto heard = all.next();
  while (heard.topic != "rejected/") heard = all.next();
  CHECK(heard.message.at("id") == "a");
  CHECK(heard.message.at("code") == "stopping");
  gate.open_all();
}

// A disk that did not answer held the exit for as long as it liked.
TEST_CASE("a log that does not finish its commit does not hold the end") {
  Gate gate;
  std::atomic<int> commits = 0;
  Running running([&](auto& options) {
    options.log = std::make_unique<WatchedLog>(commits, &gate);
    options.stop_within = std::chrono::milliseconds(50);
  });
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  peer.ask_json(fit_request("a"));
  gate.wait_for_arrival("commit");
  const auto begun = std::chrono::steady_clock::now();
  CHECK(running.stop() == 0);
  CHECK(std::chrono::steady_clock::now() - begun < std::chrono::seconds(10));  // of the 20 that systemd grants
  CHECK(running.daemon().in_flight() == 1);
  gate.open_all();
}

TEST_CASE("what lies on the feed when the daemon is told to stop is still decided") {
  Gate gate;
  Running running([&](auto& options) {
    hold_fits(options, gate);
    options.limits.in_flight = 1;
  });
  Listener fitted(running.endpoints().results, "fitted/red/");
  Peer feed(zmq::socket_type::push, running.endpoints().feed);
  feed.send({fit_request("a").dump()});
  gate.wait_for_arrival("a");  // the feed is paused now: one is all that may be in flight
  Listener health(running.endpoints().results, "health/");
  const auto before = health.next().message.at("sequence").get<int>();
  feed.send({fit_request("b").dump()});
  // The second scan needs no more than the loopback to arrive; two turns of the loop that publish health are ample.
  while (health.next().message.at("sequence").get<int>() < before + 2) continue;
  running.daemon().stop();
  gate.open_all();
  auto heard = fitted.next();
  if (heard.message.at("id") == "a") heard = fitted.next();
  CHECK(heard.message.at("id") == "b");
  CHECK(running.wait() == 0);
}

TEST_CASE("a reply leaves after the commit that holds it") {
  std::atomic<int> commits = 0;
  Running running([&](auto& options) { options.log = std::make_unique<WatchedLog>(commits); });
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  for (int i = 1; i <= 50; ++i) {
    peer.ask_json(fit_request("n" + std::to_string(i)));
    REQUIRE(peer.answer().at("kind") == "fitted");
    CHECK(commits >= i);
  }
}

TEST_CASE("a faulty configuration leaves the earlier one in force and says so; a good one takes its place") {
  std::mutex mutex;
  Reading next;
  next.faults = {{12, 7, "drives.red.pulses", "found nothing, expected at least one pulse"}};
  Running running([&](auto& options) {
    options.configuration_name = "lab.yaml";
    options.read_again = [&] {
      const std::lock_guard lock(mutex);
      return next;
    };
  });
  Peer peer(zmq::socket_type::req, running.endpoints().requests);
  running.daemon().reload();
  const auto state = state_with(peer, [](const json& s) { return !s.at("troubles").empty(); });
  CHECK(troubled(state, "lab.yaml:12:7"));
  CHECK(troubled(state, "stays in force"));
  peer.ask_json(fit_request("a"));
  CHECK(peer.answer().at("kind") == "fitted");

  auto fresh = *configuration();
  fresh.drives["green"] = fresh.drives.at("red");
  fresh.drives["green"].name = "green";
  {
    const std::lock_guard lock(mutex);
    next = Reading{fresh, {}};
  }
  running.daemon().reload();
  state_with(peer, [](const json& s) { return s.at("troubles").empty() && s.at("drives").contains("green"); });
  peer.ask_json(fit_request("b", "green"));
  CHECK(peer.answer().at("kind") == "fitted");

  fresh.sockets.feed = "tcp://127.0.0.1:7999";
  {
    const std::lock_guard lock(mutex);
    next = Reading{fresh, {}};
  }
  running.daemon().reload();
  CHECK(troubled(state_with(peer, [](const json& s) { return !s.at("troubles").empty(); }), "restart"));
}

TEST_CASE("the signals of a service reach a daemon that takes them") {
  Gate gate;
  // The signals are blocked by the daemon in this thread and in those that it starts.
  auto running = std::make_unique<Running>([&](auto& options) {
    hold_fits(options, gate);
    options.signals = true;
    options.read_again = [] { return Reading{std::nullopt, {{1, 1, "format", "found 2, expected 1"}}}; };
  });
  Peer worker(zmq::socket_type::dealer, running->endpoints().requests);
  Peer peer(zmq::socket_type::req, running->endpoints().requests);
  worker.ask_json(fit_request("a"));
  gate.wait_for_arrival("a");
  ::kill(::getpid(), SIGHUP);
  state_with(peer, [](const json& s) { return troubled(s, "format"); });
  ::kill(::getpid(), SIGTERM);
  state_with(peer, [](const json& s) { return s.at("stopping") == true; });
  gate.open_all();
  CHECK(worker.answer().at("kind") == "fitted");
  CHECK(running->wait() == 0);
}
