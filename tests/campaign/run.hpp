// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <functional>
#include <vector>

#include "tests/campaign/report.hpp"

/// A campaign from the first scan to the last.
namespace halfturn::campaign {

struct Order {
  std::int64_t scans = 20'000;             // in all, shared evenly among families and, within each, seeds
  std::vector<std::uint64_t> seeds = {1};
  int threads = 1;
};

/// Which scan the `number`-th of the campaign is. Each has a generator of its own, so what comes out does not depend on the
/// threads.
struct Place {
  std::size_t family;   // position among those wanted
  std::size_t number;   // position among the scans of the family
  std::uint64_t seed, index;
};
Place place_of(std::int64_t number, std::size_t families, const std::vector<std::uint64_t>& seeds);

/// How many of the campaign's scans are of the family at this position.
std::size_t scans_of(std::size_t family, std::size_t families, std::int64_t scans);

/// Calls `work` for every number below `count`, from so many threads, and says how far it is.
void for_all(std::int64_t count, int threads, const char* what, const std::function<void(std::int64_t)>& work);

/// Scans drawn, answered and scored. Families short of the target for healthy scans used have their first 4,000 healthy scans
/// examined: how many of them the data can decide, and how many of those are used.
Result run(const Order& order, const std::vector<const Family*>& wanted);

}  // namespace halfturn::campaign
