// SPDX-License-Identifier: Apache-2.0
// One `fit` request through the sockets, beside a raw ROUTER/DEALER round trip of the same sizes, and beside the fit alone.
// A flop of 40 points, MessagePack both ways; with the log in memory and in a file (one durable commit each).
#define CATCH_CONFIG_RUNNER
#include <benchmark/benchmark.h>

#include <atomic>
#include <filesystem>
#include <thread>

#include "plugin/log/sqlite_log.hpp"
#include "plugin/wire/decode.hpp"
#include "tests/plugin/daemon/running.hpp"
#include "tests/support/catch.hpp"

namespace {

using namespace halfturn;
using namespace halfturn::tests;

std::string next_request() {
  static std::atomic<int> number = 0;
  return packed(fit_request("n" + std::to_string(++number)));
}

std::size_t reply_size() {
  static const std::size_t size = [] {
    Running running;
    Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
    peer.send({next_request()});
    return peer.receive().back().size();
  }();
  return size;
}

void ask(benchmark::State& state, Peer& peer) {
  for (auto _ : state) {
    state.PauseTiming();
    const Frames request = {next_request()};
    state.ResumeTiming();
    peer.send(request);
    benchmark::DoNotOptimize(peer.receive());
  }
}

void raw_round_trip(benchmark::State& state) {
  zmq::context_t context;
  zmq::socket_t router(context, zmq::socket_type::router);
  router.bind("tcp://127.0.0.1:*");
  const auto endpoint = router.get(zmq::sockopt::last_endpoint);
  const std::string reply(reply_size(), 'x');
  std::thread server([&] {
    for (;;) {
      zmq::message_t identity, message;
      (void)router.recv(identity);
      (void)router.recv(message);
      if (message.size() == 0) return;
      router.send(identity, zmq::send_flags::sndmore);
      router.send(zmq::buffer(reply), zmq::send_flags::none);
    }
  });
  {
    Peer peer(zmq::socket_type::dealer, endpoint);
    ask(state, peer);
    peer.socket().set(zmq::sockopt::linger, 1000);
    peer.send({""});
  }
  server.join();
}

void fit_alone(benchmark::State& state) {
  const auto set = configuration();
  const auto request = wire::decode_request(next_request(), {});
  for (auto _ : state) benchmark::DoNotOptimize(service::fit_alone(request.request->scans.front(), &set->drives.at("red"), {}));
}

void fit_with_log_in_memory(benchmark::State& state) {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  ask(state, peer);
}

void fit_with_log_in_a_file(benchmark::State& state) {
  const auto folder = std::filesystem::temp_directory_path() / ("halfturn-bench-" + std::to_string(::getpid()));
  std::filesystem::create_directory(folder);
  {
    Running running([&](auto& options) { options.log = *log::open((folder / "nights.db").string(), log::Access::read_write); });
    Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
    ask(state, peer);
  }
  std::filesystem::remove_all(folder);
}

void status(benchmark::State& state) {
  Running running;
  Peer peer(zmq::socket_type::dealer, running.endpoints().requests);
  const Frames request = {packed(status_request("s"))};
  for (auto _ : state) {
    peer.send(request);
    benchmark::DoNotOptimize(peer.receive());
  }
}

BENCHMARK(raw_round_trip)->UseRealTime()->Unit(benchmark::kMicrosecond);
BENCHMARK(status)->UseRealTime()->Unit(benchmark::kMicrosecond);
BENCHMARK(fit_alone)->UseRealTime()->Unit(benchmark::kMicrosecond);
BENCHMARK(fit_with_log_in_memory)->UseRealTime()->Unit(benchmark::kMicrosecond);
BENCHMARK(fit_with_log_in_a_file)->UseRealTime()->Unit(benchmark::kMicrosecond);

}  // namespace

/// The peers hold their expectations to Catch, so the benchmarks run inside a test.
TEST_CASE("benchmarks") { benchmark::RunSpecifiedBenchmarks(); }

int main(int argc, char** argv) {
  benchmark::Initialize(&argc, argv);
  return Catch::Session().run();
}
