// SPDX-License-Identifier: Apache-2.0
// How the daemon stops, what survives a commit, and how it takes a new configuration.
#include <atomic>

#include "plugin/log/memory_log.hpp"
#include "tests/plugin/daemon/running.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::tests;
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

bool says(const json& state, const std::string& word) {
  for (const auto& trouble : state.at("troubles"))
    if (trouble.get<std::string>().find(word) != std::string::npos) return true;
  return false;
}

void hold_fits(halfturn::daemon::Options& options, Gate& gate) {
  options.fit = [&gate](auto& task) {
    gate.wait(task.request.scans.front().scan_name);
    halfturn::service::Service::fit(task);
  };
}

/// A log whose commits can be told to have happened.
class WatchedLog : public halfturn::log::MemoryLog {};

}  // namespace

TEST_CASE("while stopping, what was accepted is answered and what comes is turned away") {
  Gate gate;
  Running running([&](auto& options) { hold_fits(options, gate); });
  Peer worker(zmq::socket_type::dealer, running.endpoints().requests);
  worker.ask_json(fit_request("a"));
  Peer asker(zmq::socket_type::req, running.endpoints().requests);
  // The fit was sent before this is asked, yet by another connection: wait until it is in flight.
  Listener health(running.endpoints().results, "health/");
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
