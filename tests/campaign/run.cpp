// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/run.hpp"

#include <atomic>
#include <chrono>
#include <thread>

#include "tests/campaign/bound.hpp"
#include "tests/campaign/progress.hpp"
#include "tests/campaign/targets.hpp"
#include "tests/campaign/undecidable.hpp"

namespace halfturn::campaign {
namespace {

constexpr std::size_t kExamined = 4000;  // a share of 98 % is then known to 0.2 %

using Scores = std::vector<std::vector<Scored>>;  // by family

std::int64_t number_of(std::size_t family, std::size_t number, std::size_t families) {
  return static_cast<std::int64_t>(number * families + family);
}

/// The scans whose decidability is asked for.
std::vector<std::int64_t> to_examine(const Result& result, const Scores& scores) {
  std::vector<std::int64_t> numbers;
  for (std::size_t f = 0; f < scores.size(); ++f) {
    const auto& row = result.rows[f];
    if (row.healthy == 0 || static_cast<double>(row.healthy_used) >= kUsed * static_cast<double>(row.healthy)) continue;
    std::size_t taken = 0;
    for (std::size_t i = 0; i < scores[f].size() && taken < kExamined; ++i) {
      if (!scores[f][i].healthy) continue;
      numbers.push_back(number_of(f, i, scores.size()));
      ++taken;
    }
  }
  return numbers;
}

void examine(const Order& order, const std::vector<const Family*>& wanted, const Scores& scores, Result& result) {
  const auto numbers = to_examine(result, scores);
  std::vector<char> told(numbers.size());
  for_all(static_cast<std::int64_t>(numbers.size()), order.threads, "asked whether they are decidable", [&](std::int64_t i) {
    const auto at = place_of(numbers[static_cast<std::size_t>(i)], wanted.size(), order.seeds);
    told[static_cast<std::size_t>(i)] = [&] {
      const Case drawn = draw(*wanted[at.family], at.seed, at.index);
      return decidable(drawn, gaps(drawn), bound(drawn).offset);
    }();
  });
  for (std::size_t i = 0; i < numbers.size(); ++i) {
    const auto at = place_of(numbers[i], wanted.size(), order.seeds);
    auto& row = result.rows[at.family];
    ++row.examined;
    row.decidable += told[i];
    row.decidable_used += told[i] && scores[at.family][at.number].used;
  }
}

void collect(const Order& order, const std::vector<const Family*>& wanted, const Scores& scores, Result& result) {
  for (std::size_t f = 0; f < wanted.size(); ++f) {
    result.rows.push_back(gather(*wanted[f], scores[f]));
    result.wrong += result.rows.back().wrong;
    for (std::size_t i = 0; i < scores[f].size(); ++i) {
      if (!scores[f][i].wrong) continue;
      const auto at = place_of(number_of(f, i, wanted.size()), wanted.size(), order.seeds);
      result.wrong_scans.push_back({std::string(wanted[f]->name), at.seed, at.index, scores[f][i].held_against});
    }
  }
}

}  // namespace

Place place_of(std::int64_t number, std::size_t families, const std::vector<std::uint64_t>& seeds) {
  const auto n = static_cast<std::size_t>(number);
  const std::size_t within = n / families;
  return {n % families, within, seeds[within % seeds.size()], within / seeds.size()};
}

std::size_t scans_of(std::size_t family, std::size_t families, std::int64_t scans) {
  return (static_cast<std::size_t>(scans) + families - 1 - family) / families;
}

void for_all(std::int64_t count, int threads, const char* what, const std::function<void(std::int64_t)>& work) {
  if (count == 0) return;
  std::atomic<std::int64_t> next = 0;
  Progress progress(count, what);
  const auto take = [&] {
    for (std::int64_t i = next++; i < count; i = next++) {
      work(i);
      progress.one_more();
    }
  };
  std::vector<std::thread> others;
  for (int i = 1; i < threads; ++i) others.emplace_back(take);
  take();
  for (auto& thread : others) thread.join();
}

Result run(const Order& order, const std::vector<const Family*>& wanted) {
  const auto begun = std::chrono::steady_clock::now();
  Scores scores(wanted.size());
  for (std::size_t f = 0; f < wanted.size(); ++f) scores[f].resize(scans_of(f, wanted.size(), order.scans));
  for_all(order.scans, order.threads, "fitted", [&](std::int64_t i) {
    const auto at = place_of(i, wanted.size(), order.seeds);
    const Case drawn = draw(*wanted[at.family], at.seed, at.index);
    scores[at.family][at.number] = score(drawn, *wanted[at.family], answer(drawn));
  });
  Result result;
  result.seeds = order.seeds;
  result.scans = order.scans;
  result.threads = order.threads;
  collect(order, wanted, scores, result);
  examine(order, wanted, scores, result);
  result.seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - begun).count();
  return result;
}

}  // namespace halfturn::campaign
