// SPDX-License-Identifier: Apache-2.0
// Times of the inference on a 60-point flop of 100 shots a point and 2.5 cycles: one start search, one refinement, one full
// answer with all candidates, intervals and two pulses.
#include <benchmark/benchmark.h>

#include "model/infer/solution.hpp"
#include "tests/model/infer/fit_samples.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;
using constants::kTwoPi;

namespace {

struct Flop {
  Sample sample;
  Prior prior;
  FitOptions options;
  FitWorkspace work;

  explicit Flop(double decay = 0.0) {
    std::mt19937_64 random(1);
    Truth truth;
    truth.rabi = kTwoPi * 125e3;
    truth.decay = decay;
    take_flop(sample, truth, even(0.0, 20e-6, 60), 100, random);
    prior.dead_time = {0.0, 20e-9};
    prior.contrast = Known{0.9, 0.05};
    options.pulses = {{kPi, 1.0}, {kPi / 2, 1.0}};
  }
};

void start_search(benchmark::State& state) {
  Flop flop;
  std::array<Mode, 16> modes;
  const auto sampling = sampling_of(Axis::duration, flop.sample.axis);
  for (auto _ : state)
    benchmark::DoNotOptimize(duration_starts(flop.sample.batch, flop.sample.batch.site(0), flop.prior, sampling, modes, flop.work.search));
}
BENCHMARK(start_search)->Unit(benchmark::kMicrosecond);

void one_evaluation(benchmark::State& state) {
  Flop flop;
  flop.work.objective.reserve(60);
  const Readout readout = flop.sample.batch.site(0);
  const ScanObjective objective(flop.sample.batch, readout, flop.prior, static_cast<Dynamics>(state.range(0)), {}, false, flop.work.objective);
  Physical at;
  at.generalised = kTwoPi * 124e3;
  at.signal_ground = 0.06;
  at.signal_excited = 0.94;
  at.damping = 1e4;
  const Vector x = objective.pack(at);
  double value = 0.0;
  Vector gradient;
  Matrix information;
  for (auto _ : state) benchmark::DoNotOptimize(objective.evaluate(x, value, &gradient, &information));
}
BENCHMARK(one_evaluation)->DenseRange(0, 3)->Unit(benchmark::kMicrosecond);

void full_answer(benchmark::State& state) {
  Flop flop(state.range(0) == 0 ? 0.0 : 2e4);
  Fit fit;
  for (auto _ : state) {
    infer::fit(flop.sample.batch, {&flop.prior, 1}, flop.options, {&fit, 1}, flop.work);
    benchmark::DoNotOptimize(fit.rabi.value);
  }
}
BENCHMARK(full_answer)->Arg(0)->Arg(1)->Unit(benchmark::kMicrosecond);

/// A 41-point line of a pi pulse, 100 shots a point, in a window of two and a half widths to either side.
void full_line(benchmark::State& state) {
  std::mt19937_64 random(1);
  Truth truth;
  truth.rabi = kTwoPi * 50e3;
  Sample sample;
  take_line(sample, truth, kTwoPi * 10e3, 10e-6, even(-kTwoPi * 200e3, kTwoPi * 200e3, 41), 100, random);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  FitWorkspace work;
  Fit fit;
  for (auto _ : state) {
    infer::fit(sample.batch, {&prior, 1}, {}, {&fit, 1}, work);
    benchmark::DoNotOptimize(fit.line_offset.value);
  }
}
BENCHMARK(full_line)->Unit(benchmark::kMicrosecond);

}  // namespace
