// SPDX-License-Identifier: Apache-2.0
// The log's speed on the disk of the temporary folder (TMPDIR): commits of 1 and 16 fits, a page of a history, opening.
#include <benchmark/benchmark.h>

#include <memory>

#include "plugin/log/sqlite_log.hpp"
#include "tests/support/folder.hpp"

using namespace halfturn;
using namespace halfturn::log;

namespace {

constexpr Time kMinute = 60'000'000'000;

Event fit_event(std::int64_t i) {
  Event event;
  event.drive = i % 2 == 0 ? "red" : "blue";
  event.kind = "fit";
  event.happened_at = i * kMinute;
  event.id = "id-" + std::to_string(i);
  event.scan_name = "flop";
  event.axis = "duration";
  event.verdict = "apply";
  event.effect = "accepted";
  event.rabi_hz = 125340.0;
  event.pulses_s = {{"flip", 4e-6}, {"split", 2e-6}};
  return event;
}

/// A scan of 60 points and its reply are about that long.
const Bulk& bulk() {
  static const Bulk kBulk{std::string(1200, 's'), "print", "configuration", std::string(2500, 'r'), {{"room_c", 21.0}}};
  return kBulk;
}

bool append(Log& log, std::int64_t first, std::int64_t count) {
  if (!log.begin()) return false;
  for (std::int64_t i = first; i < first + count; ++i) {
    if (!log.append(fit_event(i), &bulk())) return false;
    if (!log.keep_reply("id-" + std::to_string(i), {"digest", bulk().reply}, i)) return false;
  }
  return log.commit().has_value();
}

void commit(benchmark::State& state) {
  tests::Folder folder;
  auto log = log::open(folder / "nights.db", Access::read_write).value();
  std::int64_t next = 0;
  for (auto _ : state) {
    if (!append(*log, next, state.range(0))) state.SkipWithError("the log failed");
    next += state.range(0);
  }
  state.SetItemsProcessed(state.iterations() * state.range(0));
}
BENCHMARK(commit)->Arg(1)->Arg(16)->Unit(benchmark::kMicrosecond)->UseRealTime();

/// A log of 20,000 fits, made once.
const std::string& long_log() {
  static const tests::Folder kFolder;
  static const std::string kPath = kFolder / "nights.db";
  static const bool kMade = append(*log::open(kPath, Access::read_write).value(), 0, 20'000);
  benchmark::DoNotOptimize(kMade);
  return kPath;
}

void history_of_1000(benchmark::State& state) {
  auto log = log::open(long_log(), Access::read_only).value();
  Range range;
  range.drive = "red";
  range.since = 10'000 * kMinute;
  for (auto _ : state) {
    const auto rows = log->history(range);
    if (!rows || rows->size() != 1000) state.SkipWithError("the history is not whole");
  }
  state.SetItemsProcessed(state.iterations() * 1000);
}
BENCHMARK(history_of_1000)->Unit(benchmark::kMillisecond);

void replay_of_20000(benchmark::State& state) {
  auto log = log::open(long_log(), Access::read_only).value();
  for (auto _ : state) {
    std::int64_t count = 0;
    const auto done = log->replay([&](const Event&) { ++count; });
    if (!done || count != 20'000) state.SkipWithError("the replay is not whole");
  }
}
BENCHMARK(replay_of_20000)->Unit(benchmark::kMillisecond);

void open_to_write(benchmark::State& state) {
  long_log();
  for (auto _ : state) {
    if (!log::open(long_log(), Access::read_write)) state.SkipWithError("the log does not open");
  }
}
BENCHMARK(open_to_write)->Unit(benchmark::kMillisecond);

}  // namespace

BENCHMARK_MAIN();
