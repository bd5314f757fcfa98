// SPDX-License-Identifier: Apache-2.0
#include <benchmark/benchmark.h>

#include <random>
#include <string>
#include <vector>

#include "model/dynamics/ensemble.hpp"
#include "model/dynamics/two_level.hpp"

using namespace halfturn::dynamics;

namespace {

constexpr std::size_t kPoints = 60;
constexpr double kRabi = 6.283185307179586e5;  // 100 kHz; the scan has five periods

struct Case {
  std::string name;
  Rates rates;
  std::vector<int> by;  // derivatives computed beside that by length
};

const std::vector<Case> kCases = {
    {"undamped", {kRabi, 0, 0, 0, 0}, {kByRabi}},
    {"undamped_detuned", {kRabi, 0.3 * kRabi, 0, 0, 0}, {kByRabi, kByDetuning}},
    {"decay", {kRabi, 0, 2e4, 0, 0}, {kByRabi, kByDecay}},
    {"dephasing_detuned", {kRabi, 0.3 * kRabi, 0, 0, 2e4}, {kByRabi, kByDetuning, kByDephasing}},
    {"leak_detuned", {kRabi, 0.3 * kRabi, 1e4, 1e4, 0}, {kByRabi, kByDetuning, kByDecay, kByLoss}},
    {"everything", {kRabi, 0.3 * kRabi, 1e4, 1e4, 1e4}, {kByRabi, kByDetuning, kByDecay, kByLoss, kByDephasing}},
    {"critical", {5e3, 0, 2e4, 0, 0}, {kByRabi, kByDecay}},
    {"known_lifetime", {kRabi, 0.3 * kRabi, 0.86, 0, 0}, {kByRabi, kByDetuning}},
    {"slightest_decay", {kRabi, 0, 1e-3, 0, 0}, {kByRabi, kByDecay}},
};

struct Memory {
  std::vector<double> values = std::vector<double>(7 * kPoints);
  Derivatives out;
  Workspace workspace;
  Status status{};

  explicit Memory(const Case& c) {
    const auto row = [&](int i) { return std::span(values).subspan(i * kPoints, kPoints); };
    out.population = row(0);
    for (int rate : c.by) out.by_rate[rate] = row(1 + rate);
    out.by_length = row(6);
    workspace.reserve(kPoints);
  }
};

std::vector<double> grid(bool even, double first, double last) {
  std::vector<double> result(kPoints);
  std::mt19937_64 random(1);
  std::uniform_real_distribution<double> anywhere(first, last);
  for (std::size_t k = 0; k < kPoints; ++k)
    result[k] = even ? first + (last - first) * static_cast<double>(k) / (kPoints - 1) : anywhere(random);
  return result;
}

void duration(benchmark::State& state, const Case& c, bool even) {
  Memory memory(c);
  const auto lengths = grid(even, 0, 50e-6);
  const double dead_time = 0.1e-6;
  for (auto _ : state) {
    duration_scan(std::span(&c.rates, 1), {}, lengths, std::span(&dead_time, 1), memory.out, std::span(&memory.status, 1),
                  memory.workspace);
    benchmark::DoNotOptimize(memory.values.data());
    benchmark::ClobberMemory();
  }
}

void detuning(benchmark::State& state, const Case& c) {
  Memory memory(c);
  const auto axis = grid(true, -3 * kRabi, 3 * kRabi);
  const double length = 5e-6;
  for (auto _ : state) {
    detuning_scan(std::span(&c.rates, 1), {}, axis, std::span(&length, 1), memory.out, std::span(&memory.status, 1),
                  memory.workspace);
    benchmark::DoNotOptimize(memory.values.data());
    benchmark::ClobberMemory();
  }
}

const Mode kCarrier[] = {{0.1, 0, 1}}, kTwoModes[] = {{0.1, 0, 1}, {0.08, 0, 0.5}};

const std::vector<std::pair<std::string, Ensemble>> kEnsembles = {
    {"spread", {Ensemble::Kind::spread, 0.03, false, {}}},
    {"doppler", {Ensemble::Kind::doppler, 0.05 * kRabi, false, {}}},
    {"cloud", {Ensemble::Kind::cloud, 0.3, false, {}}},
    {"thermal_5", {Ensemble::Kind::thermal, 5, false, kCarrier}},
    {"thermal_50", {Ensemble::Kind::thermal, 50, false, kCarrier}},
    {"thermal_two_modes", {Ensemble::Kind::thermal, 5, false, kTwoModes}},
};

/// Each evaluation has another coupling and parameter, as in a fit.
template <class Scan>
void mean(benchmark::State& state, const Case& c, const Ensemble& ensemble, const std::vector<double>& axis, double other,
          const Scan& scan) {
  Memory memory(c);
  std::vector<double> by_parameter(kPoints);
  EnsembleWorkspace workspace;
  Rates rates = c.rates;
  Ensemble now = ensemble;
  rates.rabi *= 1.01;
  now.parameter *= 1.01;
  for (auto _ : state) {
    rates.rabi = 2 * c.rates.rabi - rates.rabi;
    now.parameter = 2 * ensemble.parameter - now.parameter;
    scan(rates, now, {}, axis, other, memory.out, by_parameter, memory.status, workspace);
    benchmark::DoNotOptimize(memory.values.data());
    benchmark::ClobberMemory();
  }
  if (memory.status != Status::ok) state.SkipWithError("not evaluated");
}

void best_pulse(benchmark::State& state, const Ensemble& ensemble) {
  EnsembleWorkspace workspace;
  for (auto _ : state) benchmark::DoNotOptimize(best_pulse_phase(ensemble, 3.141592653589793, workspace));
}

const bool kEnsemblesRegistered = [] {
  const auto even = grid(true, 0, 50e-6), random = grid(false, 0, 50e-6), axis = grid(true, -3 * kRabi, 3 * kRabi);
  for (const auto& [name, ensemble] : kEnsembles) {
    const auto add = [&, name = name, ensemble = ensemble](const std::string& kind, const Case& c, const std::vector<double>& x,
                                                          double other, auto scan) {
      benchmark::RegisterBenchmark((kind + "/" + name + "/" + c.name).c_str(), [=, &c](benchmark::State& s) {
        mean(s, c, ensemble, x, other, scan);
      });
    };
    add("mean_duration_even", kCases[0], even, 0.1e-6, ensemble_duration_scan);
    add("mean_duration_random", kCases[0], random, 0.1e-6, ensemble_duration_scan);
    add("mean_duration_even", kCases[1], even, 0.1e-6, ensemble_duration_scan);
    add("mean_duration_even", kCases[2], even, 0.1e-6, ensemble_duration_scan);
    add("mean_detuning", kCases[0], axis, 5e-6, ensemble_detuning_scan);
    benchmark::RegisterBenchmark(("best_pulse/" + name).c_str(), [ensemble = ensemble](benchmark::State& s) {
      best_pulse(s, ensemble);
    });
  }
  return true;
}();

const bool kRegistered = [] {
  for (const Case& c : kCases) {
    benchmark::RegisterBenchmark(("duration_even/" + c.name).c_str(), [&c](benchmark::State& s) { duration(s, c, true); });
    benchmark::RegisterBenchmark(("duration_random/" + c.name).c_str(), [&c](benchmark::State& s) { duration(s, c, false); });
    benchmark::RegisterBenchmark(("detuning/" + c.name).c_str(), [&c](benchmark::State& s) { detuning(s, c); });
  }
  return true;
}();

}  // namespace
