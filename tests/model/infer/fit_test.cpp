// SPDX-License-Identifier: Apache-2.0
#include "model/infer/fit.hpp"
#include "model/infer/frequency_search.hpp"

#include <cmath>

#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;
using constants::kTwoPi;

namespace {

DynamicsSet only(Dynamics dynamics) {
  auto set = DynamicsSet::none();
  set.add(dynamics);
  return set;
}

}  // namespace

TEST_CASE("a flop is fitted to SciPy's answer on the same likelihood") {
  // scipy.optimize.minimize(method="Nelder-Mead", xatol=1e-14) on the binomial deviance plus twice the penalty of the dead time's
  // prior, -log(0.95 N(z; 0, 1) + 0.05 N(z; 0, 5)) at z = tau / 60 ns, SciPy 1.10.1, and brentq on the profile it leaves at
  // 3.841458820694124; sigma from the Fisher information, with the prior's slope over z as its curvature. Counts: binomial, numpy.random.default_rng(20).
  Sample sample;
  for (int i = 1; i <= 30; ++i) sample.axis.push_back(0.35e-6 * i);
  sample.observed = {7, 16, 23, 39, 64, 80, 98, 117, 127, 135, 148, 140, 135, 121, 106, 75, 62, 44, 31, 18, 10, 4, 11, 15, 29, 56, 70, 85, 114, 129};
  sample.weight.assign(30, 150.0);
  sample.view();
  Prior prior;
  prior.dead_time = {0.0, 60e-9};
  prior.candidates = only(Dynamics::undamped);
  FitOptions options;
  options.pulses = {{kPi, 1.0}};
  const Fit fit = fit_one(sample, prior, options);
  REQUIRE(fit.outcome == FitOutcome::fitted);
  // Nelder-Mead stops where the deviance no longer changes in the sixteenth digit: 1e-7 of a sigma^2, 3e-4 of a sigma.
  const double sigma = 0.00518080e6;
  CHECK(fit.rabi.value == Approx(0.83144877e6).margin(1e-3 * sigma));
  CHECK(fit.rabi.sigma == Approx(sigma).epsilon(1e-4));
  CHECK(fit.dead_time_s.value == Approx(0.09412316e-6).margin(1e-3 * 0.037e-6));
  CHECK(fit.dead_time_s.sigma == Approx(0.03722907e-6).epsilon(1e-4));
  CHECK(fit.floor.value == Approx(0.03773236).margin(1e-3 * 0.00708));
  CHECK(fit.contrast.value == Approx(0.95770331 - 0.03773236).margin(1e-5));
  // The profile's ends are asked for to 1e-3 of the half width.
  CHECK(fit.rabi.low == Approx(0.8212645360e6).margin(2e-3 * sigma));
  CHECK(fit.rabi.high == Approx(0.8421529173e6).margin(2e-3 * sigma));
  REQUIRE(fit.pulse_length_s.size() == 1);
  CHECK(fit.pulse_length_s[0].value == Approx(3.872579247e-6).margin(2e-11));
  CHECK(fit.pulse_length_s[0].low == Approx(3.828053983e-6).margin(4e-11));
  CHECK(fit.pulse_length_s[0].high == Approx(3.918421200e-6).margin(4e-11));
}

TEST_CASE("a line is fitted to SciPy's answer on the same likelihood") {
  // As above, offset, Rabi frequency and both signals free; numbers in kHz and 1e6 rad/s.
  Sample sample;
  for (int i = 0; i < 25; ++i) sample.axis.push_back(kTwoPi * (-200e3 + 400e3 * i / 24));
  sample.observed = {8, 9, 13, 13, 37, 43, 66, 70, 108, 130, 147, 157, 178, 180, 174, 163, 149, 141, 115, 96, 73, 55, 41, 31, 8};
  sample.weight.assign(25, 200.0);
  sample.view(Axis::detuning);
  sample.batch.pulse_length_s = 4.2e-6;
  Prior prior;
  prior.dead_time = {0.0, 0.0};
  prior.candidates = only(Dynamics::undamped);
  const Fit fit = fit_one(sample, prior);
  REQUIRE(fit.outcome == FitOutcome::fitted);
  CHECK(fit.line_offset.value / kTwoPi == Approx(21004.93982).margin(1e-3 * fit.line_offset.sigma / kTwoPi));
  CHECK(fit.rabi.value == Approx(0.65253651e6).margin(1e-3 * fit.rabi.sigma));
  CHECK(fit.floor.value == Approx(0.03840869).margin(1e-5));
  CHECK(fit.contrast.value == Approx(0.91971077 - 0.03840869).margin(1e-4));
  CHECK(fit.quality.deviance == Approx(2.0 * 10.253197928760184).epsilon(1e-7));
}

TEST_CASE("every phase and frequency on a grid is found") {
  std::mt19937_64 random(11);
  for (double cycles = 0.9; cycles < 11.0; cycles += 0.37)
    for (const double phase : {-0.1, 0.0, 0.1}) {
      Truth truth;
      truth.rabi = kTwoPi * cycles / 10e-6;
      truth.dead_time = phase * 10e-6 / cycles;
      Sample sample;
      take_flop(sample, truth, even(0.0, 10e-6, 40), 200, random);
      Prior prior;
      prior.dead_time = {0.0, 0.1 * 10e-6 / cycles};
      const Fit fit = fit_one(sample, prior);
      INFO("cycles " << cycles << " phase " << phase);
      REQUIRE(fit.outcome == FitOutcome::fitted);
      // 87 scans, 5 sigma of a fitted error: by chance in one of 2e4 seeds; the seed is fixed.
      CHECK(std::abs(fit.rabi.value - truth.rabi) < 5.0 * fit.rabi.sigma);
    }
}

TEST_CASE("95 % intervals of the Rabi frequency and of a pulse hold the truth") {
  std::mt19937_64 random(5);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  int rabi = 0, pulse = 0;
  constexpr int kScans = 400;
  for (int i = 0; i < kScans; ++i) {
    const double period = 1e-6 * std::pow(100.0, uniform(random)), span = period * (1.2 + 5.0 * uniform(random));
    Truth truth;
    truth.rabi = kTwoPi / period;
    truth.dead_time = 0.02 * period * std::normal_distribution<double>()(random);
    truth.floor = 0.3 * uniform(random);
    truth.contrast = (0.4 + 0.6 * uniform(random)) * (1.0 - truth.floor);
    Sample sample;
    take_flop(sample, truth, even(0.0, span, 25 + static_cast<int>(50 * uniform(random))), 100, random);
    Prior prior;
    prior.dead_time = {0.0, 0.02 * period};
    FitOptions options;
    options.pulses = {{kPi, 1.0}};
    const Fit fit = fit_one(sample, prior, options);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    rabi += fit.rabi.low < truth.rabi && truth.rabi < fit.rabi.high;
    const double length = truth.dead_time + 0.5 * period;
    pulse += fit.pulse_length_s[0].low < length && length < fit.pulse_length_s[0].high;
  }
  // Binomial with p = 0.95: outside 357...397 of 400 by chance less than once in 1e5 (scipy.stats.binom).
  CHECK(rabi >= 357);
  CHECK(rabi <= 397);
  CHECK(pulse >= 357);
  CHECK(pulse <= 397);
}

TEST_CASE("the known lifetime is held and the free decay is told from nothing") {
  std::mt19937_64 random(7);
  Truth truth;
  truth.rabi = kTwoPi * 125e3;
  truth.decay = 1.0 / 21.3e-6;
  Sample sample;
  take_flop(sample, truth, even(0.2e-6, 24e-6, 60), 300, random);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  prior.decay = truth.decay;
  const Fit held = fit_one(sample, prior);
  REQUIRE(held.outcome == FitOutcome::fitted);
  CHECK(held.chosen == Dynamics::undamped);
  CHECK(std::abs(held.rabi.value - truth.rabi) < 4.0 * held.rabi.sigma);
  prior.decay = 0.0;
  const Fit free = fit_one(sample, prior);
  CHECK(free.chosen != Dynamics::undamped);
  CHECK(std::abs(free.rabi.value - truth.rabi) < 4.0 * free.rabi.sigma);
}

TEST_CASE("an alias inside `expect` is a rival, which an uneven grid or history decides") {
  std::mt19937_64 random(3);
  Truth truth;
  truth.rabi = kTwoPi * 180e3;
  Sample even_grid;
  take_flop(even_grid, truth, even(0.0, 40e-6, 41), 200, random);  // sampled at 1 MHz
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  prior.contrast = Known{0.9, 0.05};
  SECTION("without expect the alias is left aside") {
    const Fit fit = fit_one(even_grid, prior);
    CHECK(fit.rabi.value == Approx(truth.rabi).epsilon(0.01));
    CHECK((!fit.quality.rival || fit.quality.rival->deviance_above > 25.0));
  }
  SECTION("with expect it is named") {
    prior.expect = Expected{kTwoPi * 50e3, kTwoPi * 950e3};
    const Fit fit = fit_one(even_grid, prior);
    REQUIRE(fit.quality.rival);
    CHECK(fit.quality.rival->deviance_above < 5.0);
    CHECK(fit.quality.rival->frequency + fit.generalised.value == Approx(kTwoPi * 1e6).epsilon(1e-3));
  }
  SECTION("history decides") {
    prior.expect = Expected{kTwoPi * 50e3, kTwoPi * 950e3};
    prior.log_rabi = Known{std::log(kTwoPi * 815e3), 0.01};
    const Fit fit = fit_one(even_grid, prior);
    CHECK(fit.quality.by_history);
    CHECK(fit.generalised.value == Approx(kTwoPi * 820e3).epsilon(0.005));
  }
  SECTION("an uneven grid decides") {
    prior.expect = Expected{kTwoPi * 50e3, kTwoPi * 950e3};
    auto lengths = even(0.0, 40e-6, 41);
    for (std::size_t i = 0; i < lengths.size(); i += 2) lengths[i] += 0.31e-6;
    Sample uneven;
    take_flop(uneven, truth, lengths, 200, random);
    const Fit fit = fit_one(uneven, prior);
    CHECK(fit.generalised.value == Approx(truth.rabi).epsilon(0.01));
    CHECK((!fit.quality.rival || fit.quality.rival->deviance_above > 25.0));
  }
  SECTION("a truth outside expect is found and said") {
    prior.expect = Expected{kTwoPi * 20e3, kTwoPi * 60e3};
    const Fit fit = fit_one(even_grid, prior);
    CHECK(fit.quality.outside_expect);
    CHECK(fit.generalised.value == Approx(truth.rabi).epsilon(0.01));
  }
}

TEST_CASE("`expect` does not hide a truth outside it on a grid that tells") {
  // Bug: a mode inside `expect` was taken although the points spoke against it by a deviance of up to 25.
  std::mt19937_64 random(8);
  int hidden = 0;
  for (int i = 0; i < 40; ++i) {
    Truth truth;
    truth.rabi = kTwoPi * 70e3;
    std::vector<double> lengths = even(0.0, 39 * 8e-6, 40);
    for (auto& length : lengths) length = std::abs(length + 0.04 * 8e-6 * std::normal_distribution<double>()(random));
    Sample sample;
    take_flop(sample, truth, lengths, 100, random);
    Prior prior;
    prior.dead_time = {0.0, 50e-9};
    prior.expect = Expected{kTwoPi * 10e3, kTwoPi * 60e3};
    const Fit fit = fit_one(sample, prior);
    hidden += fit.outcome == FitOutcome::fitted && !fit.quality.outside_expect && (!fit.quality.rival || fit.quality.rival->deviance_above > 25.0);
  }
  CHECK(hidden == 0);
}

TEST_CASE("two random lengths close together do not make a grid even") {
  std::mt19937_64 random(6);
  std::uniform_real_distribution<double> uniform(0.0, 100e-6);
  std::vector<double> lengths;
  for (int i = 0; i < 60; ++i) lengths.push_back(uniform(random));
  lengths[1] = lengths[0] + 1e-9;
  const auto sampling = sampling_of(Axis::duration, lengths);
  CHECK_FALSE(sampling.even);
  CHECK(sampling.limit / kTwoPi < 8.0 * 60 / (2 * 90e-6));
  // A grid whose points are rounded to a clock of 1 ns stays even.
  std::vector<double> rounded;
  for (int i = 0; i < 60; ++i) rounded.push_back(1e-9 * std::round(i * 333.33));
  CHECK(sampling_of(Axis::duration, rounded).even);
  CHECK(sampling_of(Axis::duration, rounded).limit == Approx(kPi / 333.33e-9).epsilon(1e-3));
}

TEST_CASE("history never overrules data that can tell") {
  std::mt19937_64 random(4);
  Truth truth;
  truth.rabi = kTwoPi * 180e3;
  Sample sample;
  take_flop(sample, truth, even(0.0, 40e-6, 81), 200, random);
  Prior prior;
  prior.log_rabi = Known{std::log(kTwoPi * 90e3), 0.005};
  const Fit fit = fit_one(sample, prior);
  CHECK_FALSE(fit.quality.by_history);
  CHECK(fit.rabi.value == Approx(truth.rabi).epsilon(0.01));
}

TEST_CASE("known contrast tells the detuning, and the bare frequency with it") {
  std::mt19937_64 random(9);
  Truth truth;
  truth.rabi = kTwoPi * 100e3;
  truth.detuning = kTwoPi * 50e3;
  Sample sample;
  take_flop(sample, truth, even(0.0, 30e-6, 60), 400, random);
  Prior prior;
  prior.dead_time = {0.0, 50e-9};
  prior.detuning = Known{0.0, kTwoPi * 40e3};
  prior.contrast = Known{0.9, 0.01};
  prior.floor = Known{0.05, 0.01};
  FitOptions options;
  options.pulses = {{kPi, 1.0}};
  const Fit fit = fit_one(sample, prior, options);
  REQUIRE(fit.outcome == FitOutcome::fitted);
  CHECK(std::abs(fit.rabi.value - truth.rabi) < 4.0 * fit.rabi.sigma);
  CHECK(fit.rabi.sigma < 0.02 * truth.rabi);
  const double generalised = std::hypot(truth.rabi, truth.detuning);
  CHECK(std::abs(fit.generalised.value - generalised) < 4.0 * fit.generalised.sigma);
  CHECK(fit.pulse_length_s[0].value == Approx(kPi / generalised).epsilon(0.01));
}

TEST_CASE("flat scans and ramps give no evidence of an oscillation") {
  std::mt19937_64 random(13);
  int flat = 0, ramp = 0;
  for (int i = 0; i < 200; ++i) {
    Sample sample;
    Truth nothing;
    nothing.contrast = 0.0;
    nothing.floor = 0.4;
    take_flop(sample, nothing, even(0.0, 10e-6, 40), 100, random);
    const Fit fit = fit_one(sample, {});
    flat += fit.outcome == FitOutcome::fitted && fit.quality.over_flat >= 30.0;
    for (std::size_t k = 0; k < sample.axis.size(); ++k)
      sample.observed[k] = std::binomial_distribution<int>(100, 0.2 + 0.6 * static_cast<double>(k) / 39.0)(random);
    const Fit rising = fit_one(sample, {});
    ramp += rising.outcome == FitOutcome::fitted && rising.quality.over_monotone >= 30.0;
  }
  // The best chance oscillation reaches 17 to 25 once in a thousand (design figures): 30 in 200 scans hardly ever.
  CHECK(flat == 0);
  CHECK(ramp == 0);
}

TEST_CASE("lines: the centre is found and its interval holds it") {
  std::mt19937_64 random(21);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  int held = 0;
  constexpr int kScans = 200;
  for (int i = 0; i < kScans; ++i) {
    const double pulse = 10e-6, area = kPi * (0.4 + 1.0 * uniform(random));
    Truth truth;
    truth.rabi = area / pulse;
    const double offset = kTwoPi * 40e3 * (2.0 * uniform(random) - 1.0);
    Sample sample;
    take_line(sample, truth, offset, pulse, even(-kTwoPi * 200e3, kTwoPi * 200e3, 41), 100, random);
    Prior prior;
    prior.dead_time = {0.0, 20e-9};
    const Fit fit = fit_one(sample, prior);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    held += fit.line_offset.low < offset && offset < fit.line_offset.high;
  }
  // Binomial with p = 0.95: outside 174...199 of 200 by chance about once in 1e4 (scipy.stats.binom).
  CHECK(held >= 174);
  CHECK(held <= 199);
}

TEST_CASE("gradients of the objective agree with differences, all dynamics by all readouts by all leads") {
  std::mt19937_64 random(17);
  ObjectiveWorkspace workspace;
  const std::vector<double> durations = even(0.3e-6, 20e-6, 24), detunings = even(-kTwoPi * 150e3, kTwoPi * 170e3, 24);
  workspace.reserve(24);
  for (const auto kind : {Readout::Kind::binomial, Readout::Kind::gaussian, Readout::Kind::poisson})
    for (const auto axis : {Axis::duration, Axis::detuning})
      for (const auto dynamics : kAllDynamics)
        for (const auto lead : {Lead::Kind::generalised, Lead::Kind::bare, Lead::Kind::mean, Lead::Kind::pulse_length}) {
          if (axis == Axis::detuning && lead != Lead::Kind::generalised && lead != Lead::Kind::mean) continue;
          std::vector<double> observed, weight;
          for (int i = 0; i < 24; ++i) {
            observed.push_back(kind == Readout::Kind::gaussian ? 0.3 + 0.01 * i : 20.0 + 2.0 * i);
            weight.push_back(kind == Readout::Kind::gaussian ? 0.05 : 100.0);
          }
          ScanBatch scan;
          scan.kind = axis;
          scan.axis = axis == Axis::duration ? durations : detunings;
          scan.readout = kind;
          scan.observed = observed;
          scan.weight = weight;
          scan.pulse_length_s = 5e-6;
          if (kind != Readout::Kind::gaussian) scan.references = References{90, 100, 5, 100};
          Prior prior;
          prior.dead_time = {10e-9, 30e-9};
          prior.detuning = Known{kTwoPi * 10e3, kTwoPi * 20e3};
          prior.contrast = Known{0.8, 0.1};
          prior.floor = Known{0.1, 0.05};
          prior.log_rabi = Known{std::log(kTwoPi * 120e3), 0.1};
          prior.decay = 2e4;
          prior.motion = {{0.2, 0, 1.0}};
          prior.drift = Known{0.0, 0.05};
          const std::vector<double> progress = even(-0.5, 0.5, 24);
          scan.progress = progress;
          const Readout readout = scan.site(0);
          const ScanObjective objective(scan, readout, prior, dynamics, {lead, kPi, 1.0}, false, workspace);
          Physical at;
          at.generalised = kTwoPi * 123e3;
          at.detuning_square = std::pow(kTwoPi * 30e3, 2);
          at.line_offset = kTwoPi * 13e3;
          at.dead_time = 22e-9;
          at.signal_ground = 0.12;
          at.signal_excited = 0.91;
          at.damping = 3e4;
          at.dephasing = 2e4;
          at.drift = 0.02;
          at.breadth = dynamics == Dynamics::thermal ? 3.0 : std::pow(dynamics == Dynamics::doppler ? kTwoPi * 25e3 : 0.15, 2);
          const Vector x = objective.pack(at);
          double value = 0.0;
          Vector gradient;
          Matrix information;
          REQUIRE(objective.evaluate(x, value, &gradient, &information));
          // The chain rule from the generalised frequency's coordinates comes to the same, to rounding.
          const ScanObjective plain(scan, readout, prior, dynamics, {}, false, workspace);
          Minimum found;
          found.x = plain.pack(at);
          REQUIRE(plain.evaluate(found.x, found.value, &found.gradient, &found.information));
          const Minimum carried = objective.in_coordinates(found, at);
          const Vector unit = information.diagonal().cwiseSqrt();
          const bool alike = (carried.information - information).cwiseAbs().cwiseQuotient(unit * unit.transpose()).maxCoeff() < 1e-10 &&
                             (carried.gradient - gradient).cwiseAbs().cwiseQuotient(unit).maxCoeff() < 1e-8;
          INFO("kind " << int(kind) << " axis " << int(axis) << " dynamics " << int(dynamics) << " lead " << int(lead));
          CHECK(alike);
          for (int j = 0; j < objective.layout().count; ++j) {
            const double step = 1e-5 / std::sqrt(information(j, j)) + 1e-6 * std::abs(x[j]);
            Vector up = x, down = x;
            up[j] += step;
            down[j] -= step;
            double above = 0.0, below = 0.0;
            REQUIRE(objective.evaluate(up, above, nullptr, nullptr));
            REQUIRE(objective.evaluate(down, below, nullptr, nullptr));
            INFO("kind " << int(kind) << " axis " << int(axis) << " dynamics " << int(dynamics) << " lead " << int(lead) << " parameter " << j);
            // Rounding: 1e-16 of the value over the step; truncation: the step squared. In units of a sigma's slope.
            const double scale = std::sqrt(information(j, j)) + std::abs(gradient[j]);
            CHECK(std::abs((above - below) / (2.0 * step) - gradient[j]) < 2e-4 * scale);
          }
        }
}

TEST_CASE("few points, no shots and missing points are outcomes, not failures") {
  Sample sample;
  sample.axis = even(0.0, 1e-6, 6);
  sample.observed.assign(6, 10.0);
  sample.weight.assign(6, 20.0);
  sample.view();
  CHECK(fit_one(sample, {}).outcome == FitOutcome::too_few_points);
  sample.axis = even(0.0, 1e-6, 30);
  sample.observed.assign(30, 0.0);
  sample.weight.assign(30, 0.0);
  sample.view();
  CHECK(fit_one(sample, {}).outcome == FitOutcome::too_few_points);
  std::mt19937_64 random(2);
  Truth truth;
  truth.rabi = kTwoPi * 1.5e6;
  take_flop(sample, truth, even(0.0, 2e-6, 40), 100, random);
  for (std::size_t i = 5; i < 12; ++i) sample.weight[i] = sample.observed[i] = 0.0;
  sample.view();
  Prior prior;
  prior.dead_time = {0.0, 10e-9};
  const Fit fit = fit_one(sample, prior);
  REQUIRE(fit.outcome == FitOutcome::fitted);
  CHECK(fit.quality.points == 33);
  CHECK(std::abs(fit.rabi.value - truth.rabi) < 4.0 * fit.rabi.sigma);
}

// Bug: on random lengths of less than a cycle the starts of a slow flop found no room beside the peaks at high frequencies, and one a
// hundred times too high was given, with an interval, though a curve that only rises did as well. The rise below is the first third of a flop by Rabi's formula (I. I. Rabi, Phys. Rev. 51, 652 (1937)). Seeded.
TEST_CASE("a flop that a monotone curve describes as well has the value of a slow one, and no interval") {
  std::mt19937_64 random(8);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  for (int i = 0; i < 10; ++i) {
    std::vector<double> lengths(30);
    for (double& t : lengths) t = 20e-6 * uniform(random);
    Sample sample;
    Truth truth;
    truth.rabi = kTwoPi * 0.33 / 20e-6;
    take_flop(sample, truth, lengths, 300, random);
    FitOptions options;
    options.pulses = {{kPi, 1.0}};
    Prior prior;
    prior.dead_time = {0.0, 100e-9};
    const Fit fit = fit_one(sample, prior, options);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    REQUIRE(fit.quality.over_flat > options.least_evidence);
    REQUIRE(fit.quality.over_monotone < options.least_evidence);
    CHECK(std::abs(std::log(fit.rabi.value / truth.rabi)) < std::log(1.4));  // what a rise tells; the sigmas are about 0.1
    for (const Estimate& e : {fit.rabi, fit.generalised, fit.pulse_length_s[0]}) {
      CHECK(std::isfinite(e.value));
      CHECK(std::isnan(e.low));
      CHECK(std::isnan(e.sigma));
      CHECK(e.why.find("only rises or falls") != std::string_view::npos);
    }
  }
}

TEST_CASE("a search over part of the frequencies finds there what one over all does") {
  std::mt19937_64 random(3);
  std::vector<double> time = even(0.0, 20e-6, 40), value(40), weight(40, 1.0);
  for (double& v : value) v = std::normal_distribution<double>()(random);
  const LinearPoints points{time, value, weight, 0.0};
  const TrialGrid grid{kTwoPi * 1e4, kTwoPi * 1e4, 50};
  const std::vector<double> dampings = {0.0, 1e5};
  FrequencySearch all, part;
  search_frequencies(points, grid, dampings, all);
  std::vector<char> wanted(50, 0);
  wanted[13] = wanted[49] = 1;
  search_frequencies(points, grid, dampings, part, wanted);
  for (std::size_t d = 0; d < 2; ++d)
    for (std::size_t k = 0; k < 50; ++k) {
      const bool in_block = k / 4 == 13 / 4 || k / 4 == 49 / 4;
      CHECK(part.gain[d * 50 + k] == (in_block ? all.gain[d * 50 + k] : -1.0));
    }
}
