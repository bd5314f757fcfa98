// SPDX-License-Identifier: Apache-2.0
#include <atomic>
#include <cstdlib>
#include <new>

#include "tests/model/dynamics/ensemble_support.hpp"
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

TEST_CASE("a warm evaluation of an ensemble takes nothing from the heap") {
  using Kind = Ensemble::Kind;
  const Mode modes[] = {{0.1, 0, 1}, {0.15, 1, 0.7}};
  const std::vector<Ensemble> ensembles = {{Kind::spread, 0.1, false, {}},
                                           {Kind::doppler, 0.2, false, {}},
                                           {Kind::cloud, 0.3, false, {}},
                                           {Kind::thermal, 5, false, std::span(modes, 1)},
                                           {Kind::thermal, 2, false, modes}};
  const std::vector<Rates> cases = {{2, 0, 0, 0, 0}, {2, 0.7, 0.2, 0.3, 0.1}};
  std::vector<double> axis, rows[7];
  for (int k = 0; k < 200; ++k) axis.push_back(0.1 * k);
  std::vector<double> by_parameter(axis.size());
  const auto all = tests::spans(rows, axis.size());
  Derivatives undamped = all;
  for (int rate : {kByDecay, kByLoss, kByDephasing}) undamped.by_rate[rate] = {};
  EnsembleWorkspace workspace;
  const Start start{Prepared::ground, 0.05, LostReads::dark};
  const auto evaluate = [&] {
    int good = 0;
    for (const Ensemble& ensemble : ensembles)
      for (const Rates& rates : cases) {
        Status status{};
        const Derivatives& out = rates.decay == 0 ? undamped : all;
        ensemble_duration_scan(rates, ensemble, start, axis, 0.1, out, by_parameter, status, workspace);
        good += status == Status::ok;
        ensemble_detuning_scan(rates, ensemble, start, axis, 2.0, out, by_parameter, status, workspace);
        good += status == Status::ok;
        good += best_pulse_phase(ensemble, 3.0, workspace).value > 0;
      }
    return good;
  };
  const int first = evaluate();
  const long before = allocations;
  const int second = evaluate();
  const long during = allocations - before;
  CHECK(first == 30);
  CHECK(second == 30);
  CHECK(during == 0);
}
