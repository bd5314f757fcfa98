// SPDX-License-Identifier: Apache-2.0
#include <atomic>
#include <cstdlib>
#include <new>

#include "tests/model/dynamics/reference_table.hpp"
#include "tests/support/catch.hpp"

namespace {
std::atomic<long> allocations{0};
}

void* operator new(std::size_t size) {
  ++allocations;
  if (void* memory = std::malloc(size == 0 ? 1 : size)) return memory;
  throw std::bad_alloc();
}
void* operator new(std::size_t size, const std::nothrow_t&) noexcept {
  ++allocations;
  return std::malloc(size == 0 ? 1 : size);
}
void operator delete(void* memory) noexcept { std::free(memory); }
void operator delete(void* memory, const std::nothrow_t&) noexcept { std::free(memory); }
void operator delete(void* memory, std::size_t) noexcept { std::free(memory); }

using namespace halfturn;
using namespace halfturn::dynamics;

TEST_CASE("a warm evaluation takes nothing from the heap") {
  const std::vector<Rates> batch = {{2, 0, 0, 0, 0}, {2, 0.7, 0.2, 0.3, 0.1}, {0.25, 0, 1.0, 0, 0}, {2, 0.7, 1e-9, 0, 0}};
  const std::vector<double> even = {0.0, 0.5, 1.0, 1.5, 2.0}, uneven = {0.1, 0.7, 0.3, 2.0, 1.1}, pulse(batch.size(), 1.5);
  std::vector<double> rows[7];
  std::vector<Status> status(batch.size());
  const auto out = tests::spans(rows, batch.size() * even.size());
  Workspace workspace;
  workspace.reserve(even.size());
  const long before = allocations;
  double sum = 0;
  duration_scan(batch, {}, even, {}, out, status, workspace);
  duration_scan(batch, {}, uneven, {}, out, status, workspace);
  detuning_scan(batch, {}, uneven, pulse, out, status, workspace);
  for (const Rates& rates : batch) sum += population(rates, {}, 1.0);
  const long during = allocations - before;
  CHECK(during == 0);
  CHECK(before > 0);  // the counter counts
  CHECK(sum > 0);
}
