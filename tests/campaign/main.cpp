// SPDX-License-Identifier: Apache-2.0
#include <unistd.h>

#include <CLI/CLI.hpp>
#include <atomic>
#include <chrono>
#include <cstdio>
#include <iostream>
#include <optional>
#include <thread>

#include "tests/campaign/report.hpp"
#include "tests/campaign/targets.hpp"

using namespace halfturn::campaign;

namespace {

struct Order {
  std::int64_t scans = 20'000;
  std::uint64_t seed = 1;
  std::string family;
  std::optional<std::uint64_t> index;
  int threads = static_cast<int>(std::max(1u, std::thread::hardware_concurrency()));
  bool json = false, check = false;
};

class Progress {
 public:
  explicit Progress(std::int64_t whole) : whole_(whole), terminal_(isatty(STDERR_FILENO) != 0) {}

  /// Called by any thread; says every percent on a terminal, every tenth elsewhere.
  void one_more() {
    const std::int64_t done = ++done_, steps = terminal_ ? 100 : 10;
    if (done * steps / whole_ == (done - 1) * steps / whole_) return;
    std::fprintf(stderr, terminal_ ? "\r%3lld %% of %lld scans" : "%lld %% of %lld scans\n", static_cast<long long>(done * 100 / whole_),
                 static_cast<long long>(whole_));
    if (terminal_ && done == whole_) std::fputc('\n', stderr);
  }

 private:
  std::atomic<std::int64_t> done_ = 0;
  std::int64_t whole_;
  bool terminal_;
};

/// Scan i of the campaign is scan i / families of family i mod families. Each has a generator of its own, so what comes out
/// does not depend on the threads.
Result run(const Order& order, const std::vector<const Family*>& wanted) {
  const auto count = static_cast<std::int64_t>(wanted.size());
  std::vector<std::vector<Scored>> scored(wanted.size());
  for (std::int64_t f = 0; f < count; ++f) scored[static_cast<std::size_t>(f)].resize(static_cast<std::size_t>((order.scans - f + count - 1) / count));
  std::atomic<std::int64_t> next = 0;
  Progress progress(order.scans);
  const auto work = [&] {
    for (std::int64_t i = next++; i < order.scans; i = next++) {
      const auto f = static_cast<std::size_t>(i % count), index = static_cast<std::size_t>(i / count);
      scored[f][index] = score(draw(*wanted[f], order.seed, index), *wanted[f]);
      progress.one_more();
    }
  };
  const auto begun = std::chrono::steady_clock::now();
  std::vector<std::thread> threads;
  for (int i = 1; i < order.threads; ++i) threads.emplace_back(work);
  work();
  for (auto& thread : threads) thread.join();

  Result result;
  result.seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - begun).count();
  result.seed = order.seed;
  result.scans = order.scans;
  result.threads = order.threads;
  for (std::size_t f = 0; f < wanted.size(); ++f) {
    result.rows.push_back(gather(*wanted[f], scored[f]));
    result.wrong += result.rows.back().wrong;
    for (std::size_t index = 0; index < scored[f].size(); ++index)
      if (scored[f][index].wrong)
        result.wrong_scans.push_back({std::string(wanted[f]->name), order.seed, index, scored[f][index].held_against});
  }
  return result;
}

}  // namespace

int main(int argc, char** argv) {
  Order order;
  CLI::App app{"Simulated scans, fitted and decided as the daemon would, and held against the truth."};
  app.add_option("--scans", order.scans, "how many in all, shared evenly among the families")->check(CLI::PositiveNumber)->capture_default_str();
  app.add_option("--seed", order.seed, "the same seed gives the same scans")->capture_default_str();
  app.add_option("--family", order.family, "this family alone");
  app.add_option("--index", order.index, "with --family: show this scan, its truth and its reply")->needs("--family");
  app.add_option("--threads", order.threads, "how many")->check(CLI::PositiveNumber)->capture_default_str();
  app.add_flag("--json", order.json, "JSON instead of a table");
  app.add_flag("--check", order.check, "exit with 1 where a figure is outside its band, widened to a chance of one in a million");
  CLI11_PARSE(app, argc, argv);

  std::vector<const Family*> wanted;
  for (const auto& family : families())
    if (order.family.empty() || order.family == family.name) wanted.push_back(&family);
  if (wanted.empty()) {
    std::cerr << "--family: found `" << order.family << "`, expected one of";
    for (const auto& family : families()) std::cerr << ' ' << family.name;
    std::cerr << '\n';
    return 2;
  }
  if (order.index) {
    print_case(std::cout, draw(*wanted.front(), order.seed, *order.index), *wanted.front());
    return 0;
  }
  const auto result = run(order, wanted);
  order.json ? print_json(std::cout, result) : print_table(std::cout, result);
  if (!order.check) return 0;
  const auto failed = failures(result);
  for (const auto& sentence : failed) std::cerr << sentence << '\n';
  return failed.empty() ? 0 : 1;
}
