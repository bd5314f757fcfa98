// SPDX-License-Identifier: Apache-2.0
// Scans of the drive amplitude. The truth is Rabi's formula with a saturating coupling, written out here.
#include <algorithm>
#include <cmath>
#include <random>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/solution.hpp"
#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;
using constants::kTwoPi;

namespace {

struct Drive {
  double per_amplitude = kTwoPi * 300e3;  // rad/s
  double compression = 0.0;               // 1/a_s^2, a_s the amplitude towards which the output saturates
  double pulse_s = 4e-6;
  Truth atom;

  double coupling(double amplitude) const { return per_amplitude * amplitude / std::sqrt(1.0 + compression * amplitude * amplitude); }
  double signal(double amplitude) const {
    Truth truth = atom;
    truth.rabi = coupling(amplitude);
    return truth.rabi > 0.0 ? truth.signal(pulse_s) : truth.floor;
  }
  /// The amplitude of a pulse of this angle and length.
  double amplitude(double angle, double length) const {
    const double needed = angle / (length - atom.dead_time) / per_amplitude;
    return needed / std::sqrt(1.0 - compression * needed * needed);
  }
};

void take(Sample& sample, const Drive& drive, std::vector<double> amplitudes, int shots, std::mt19937_64& random) {
  sample.axis = std::move(amplitudes);
  sample.observed.clear();
  for (const double a : sample.axis) sample.observed.push_back(std::binomial_distribution<int>(shots, drive.signal(a))(random));
  sample.weight.assign(sample.axis.size(), shots);
  sample.view(Axis::amplitude);
  sample.batch.pulse_length_s = drive.pulse_s;
}

FitOptions asked(double angle, double length, double area = 1.0) {
  FitOptions options;
  options.pulses = {{angle, area, length}};
  return options;
}

}  // namespace


TEST_CASE("a scan of amplitudes is fitted to SciPy's answer on the same likelihood") {
  // scipy.optimize.minimize(method="Nelder-Mead", xatol=1e-12, fatol=1e-13, restarted 8 times) on the binomial deviance of Rabi's
  // formula with the coupling k a / sqrt(1 + q a^2), plus twice the penalty of the dead time's prior (fit_test.cpp) at 20 ns, SciPy
  // 1.10.1; brentq on the profiles that it leaves at 3.841458820694124. Counts: binomial, numpy.random.default_rng(20240611).
  Sample sample;
  sample.axis = even(0.03, 0.9, 30);
  sample.observed = {6,   28,  24,  30,  54, 69, 85, 93, 94, 114, 123, 122, 132, 125, 119,
                     110, 107, 100, 83, 60, 57, 36, 32, 27, 14,  10,  13,  9,   5,   6};
  sample.weight.assign(30, 150.0);
  sample.view(Axis::amplitude);
  sample.batch.pulse_length_s = 4e-6;
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  prior.detuning = Known{kTwoPi * 40e3, 0.0};
  prior.candidates = DynamicsSet::none();
  prior.candidates.add(Dynamics::undamped);
  // Another length than the scan's, where the dead time has its say.
  const Fit fit = fit_one(sample, prior, asked(kPi, 5e-6, 0.9));
  REQUIRE(fit.outcome == FitOutcome::fitted);
  const auto& k = fit.rabi_per_amplitude;
  const auto& a = fit.pulse_amplitude.at(0);
  // Nelder-Mead stops where the deviance no longer changes in the fifteenth digit: 1e-3 of a sigma; the profile's ends are asked
  // for to 1e-3 of the half width.
  const double of_k = kTwoPi * 6.19e3, of_a = 4.6e-3;
  CHECK(fit.quality.deviance == Approx(34.4937522).margin(1e-5));
  CHECK(k.value == Approx(kTwoPi * 335201.33181).margin(1e-3 * of_k));
  CHECK(k.low == Approx(kTwoPi * 323592.01417).margin(2e-3 * of_k));
  CHECK(k.high == Approx(kTwoPi * 347872.55794).margin(2e-3 * of_k));
  CHECK(a.value == Approx(0.34066058588).margin(1e-3 * of_a));
  CHECK(a.low == Approx(0.33154498181).margin(2e-3 * of_a));
  CHECK(a.high == Approx(0.34959619162).margin(2e-3 * of_a));
  CHECK(fit.physical.compression == Approx(0.48413315817).margin(1e-4));
  CHECK(fit.compression.value == Approx(1.0 - 1.0 / std::sqrt(1.0 + 0.48413315817 * 0.81)).margin(1e-4));
  CHECK(fit.compression.low < fit.compression.value);
  CHECK(fit.compression.value < fit.compression.high);
  CHECK(std::isnan(fit.rabi.value));
  CHECK(fit.pulse_length_s.empty());
}

// While AICc chose between a straight line and saturation, with averages over both, 4 % lost and seen by 15 points left intervals
// of 95 % that held the amplitude in 77 to 83 %. So the response is always free.
TEST_CASE("95 % intervals of a pulse's amplitude and of the gain hold the truth, saturated or not") {
  // Of the coupling 0, 2, 4, 14 and 29 % are lost at the largest amplitude, or 5 % gained.
  const double square = GENERATE(0.0, 0.04, 0.09, 0.36, 1.0, -0.1);
  const int points = GENERATE(15, 41);
  CAPTURE(square, points);
  std::mt19937_64 random(3);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  int amplitude = 0, half = 0, gain = 0, too_long = 0;
  for (int i = 0; i < 200; ++i) {
    Drive drive;
    drive.compression = square;
    drive.atom.dead_time = std::normal_distribution<double>(0, 20e-9)(random);
    Sample sample;
    take(sample, drive, even(0.0, 1.0, points), 100, random);
    FitOptions options = asked(kPi, 3.2e-6);
    options.pulses.push_back({kPi / 2, 1.0, drive.pulse_s});
    const Fit fit = fit_one(sample, prior, options);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    const auto &a = fit.pulse_amplitude.at(0), &b = fit.pulse_amplitude.at(1), &k = fit.rabi_per_amplitude;
    const double pi = drive.amplitude(kPi, 3.2e-6), pi_half = drive.amplitude(kPi / 2, drive.pulse_s);
    amplitude += a.low <= pi && pi <= a.high;
    half += b.low <= pi_half && pi_half <= b.high;
    gain += k.low <= drive.per_amplitude && drive.per_amplitude <= k.high;
    too_long += a.high - a.low > 8.0 * a.sigma;
  }
  CAPTURE(amplitude, half, gain);
  // Binomial with p = 0.95: fewer than 176 of 200 by chance less than once in 1e4 (scipy.stats.binom.cdf(175, 200, 0.95) = 3e-5).
  CHECK(amplitude >= 176);
  CHECK(half >= 176);
  CHECK(gain >= 176);
  CHECK(too_long == 0);
}

TEST_CASE("the intervals hold where the atom decays, and one length away from the scan's") {
  std::mt19937_64 random(6);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  int amplitude = 0;
  for (int i = 0; i < 200; ++i) {
    Drive drive;
    drive.compression = 0.16;
    drive.atom.decay = 8e4;
    drive.atom.dead_time = std::normal_distribution<double>(0, 20e-9)(random);
    Sample sample;
    take(sample, drive, even(0.04, 1.0, 33), 150, random);
    const Fit fit = fit_one(sample, prior, asked(kPi, 5e-6));
    REQUIRE(fit.outcome == FitOutcome::fitted);
    const auto& a = fit.pulse_amplitude.at(0);
    const double truth = drive.amplitude(kPi, 5e-6);
    amplitude += a.low <= truth && truth <= a.high;
  }
  CAPTURE(amplitude);
  CHECK(amplitude >= 176);  // chance as above
}

TEST_CASE("the intervals hold where the carrier is known poorly") {
  std::mt19937_64 random(8);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  prior.detuning = Known{0.0, kTwoPi * 25e3};  // a fifth of the coupling of the pulse, half a radian in its length
  int amplitude = 0;
  for (int i = 0; i < 200; ++i) {
    Drive drive;
    drive.compression = 0.1;
    drive.atom.detuning = std::normal_distribution<double>(0, kTwoPi * 25e3)(random);
    drive.atom.dead_time = std::normal_distribution<double>(0, 20e-9)(random);
    Sample sample;
    take(sample, drive, even(0.0, 1.0, 33), 150, random);
    const Fit fit = fit_one(sample, prior, asked(kPi, drive.pulse_s));
    REQUIRE(fit.outcome == FitOutcome::fitted);
    const auto& a = fit.pulse_amplitude.at(0);
    const double truth = drive.amplitude(kPi, drive.pulse_s);
    amplitude += a.low <= truth && truth <= a.high;
  }
  CAPTURE(amplitude);
  CHECK(amplitude >= 176);  // chance as above
}

TEST_CASE("every rotation and compression on a grid is found") {
  // Counts without noise: what is found is the truth, or it was not found.
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  std::mt19937_64 random(1);
  int missed = 0;
  for (const double turns : {0.9, 1.3, 2.0, 3.1, 4.7, 7.0, 10.3})
    for (const double lost : {-0.2, 0.0, 0.03, 0.11, 0.2, 0.31, 0.42, 0.54}) {
      Drive drive;
      drive.compression = 1.0 / ((1.0 - lost) * (1.0 - lost)) - 1.0;
      drive.per_amplitude = kTwoPi * turns / drive.pulse_s / (1.0 - lost);
      Sample sample;
      take(sample, drive, even(0.0, 1.0, 61), 1, random);
      for (std::size_t i = 0; i < sample.axis.size(); ++i) {
        sample.observed[i] = 400.0 * drive.signal(sample.axis[i]);
        sample.weight[i] = 400.0;
      }
      const Fit fit = fit_one(sample, prior, asked(kPi, drive.pulse_s));
      REQUIRE(fit.outcome == FitOutcome::fitted);
      CAPTURE(turns, lost, fit.pulse_amplitude[0].value, drive.amplitude(kPi, drive.pulse_s), fit.quality.deviance);
      const bool there = std::abs(fit.pulse_amplitude[0].value / drive.amplitude(kPi, drive.pulse_s) - 1.0) < 0.02;
      CHECK(there);
      missed += !there;
      if (turns > 1.0) CHECK(fit.compression.value == Approx(lost).margin(0.01));
      CHECK(fit.quality.cycles < turns + 0.05);
    }
  CHECK(missed == 0);
}

TEST_CASE("gradients of scans of amplitudes agree with differences, all dynamics by all readouts by all leads") {
  ObjectiveWorkspace workspace;
  const std::vector<double> amplitudes = even(0.0, 0.9, 24);
  workspace.reserve(24);
  for (const auto kind : {Readout::Kind::binomial, Readout::Kind::gaussian, Readout::Kind::poisson})
    for (const auto dynamics : {Dynamics::undamped, Dynamics::dephasing, Dynamics::decay, Dynamics::leak})
      for (const auto lead : {Lead::Kind::generalised, Lead::Kind::per_amplitude, Lead::Kind::pulse_amplitude})
        for (const bool saturating : {false, true}) {
          CAPTURE(static_cast<int>(kind), name(dynamics), static_cast<int>(lead), saturating);
          std::vector<double> observed, weight;
          for (int i = 0; i < 24; ++i) {
            observed.push_back(kind == Readout::Kind::gaussian ? 0.3 + 0.01 * i : 20.0 + 2.0 * i);
            weight.push_back(kind == Readout::Kind::gaussian ? 0.05 : 100.0);
          }
          ScanBatch scan;
          scan.kind = Axis::amplitude;
          scan.axis = amplitudes;
          scan.readout = kind;
          scan.observed = observed;
          scan.weight = weight;
          scan.pulse_length_s = 4e-6;
          Prior prior;
          prior.dead_time = {10e-9, 30e-9};
          prior.detuning = Known{kTwoPi * 10e3, kTwoPi * 20e3};
          prior.decay = 2e4;
          const Readout readout = scan.site(0);
          const ScanObjective objective(scan, readout, prior, dynamics, {lead, kPi, 0.8, 5.5e-6}, false, workspace);
          Physical at;
          at.generalised = 7.3;
          at.detuning_square = std::pow(kTwoPi * 30e3, 2);
          at.dead_time = 22e-9;
          at.signal_ground = 0.12;
          at.signal_excited = 0.91;
          at.damping = dynamics == Dynamics::undamped ? 0.0 : 3e4;
          at.compression = saturating ? 0.4 : -0.3;
          const Vector x = objective.pack(at);
          // The coordinates say what they were packed from.
          CHECK(objective.unpack(x).generalised == Approx(at.generalised).epsilon(1e-12));
          double value = 0.0;
          Vector gradient;
          Matrix information;
          REQUIRE(objective.evaluate(x, value, &gradient, &information));
          for (int j = 0; j < objective.layout().count; ++j) {
            CAPTURE(j);
            const double step = 1e-5 * std::max(std::abs(x[j]), j == objective.layout().dead_time ? 1e-7 : 1e-3);
            Vector up = x, down = x;
            up[j] += step;
            down[j] -= step;
            double above = 0.0, below = 0.0;
            REQUIRE(objective.evaluate(up, above, nullptr, nullptr));
            REQUIRE(objective.evaluate(down, below, nullptr, nullptr));
            const double difference = (above - below) / (2.0 * step);
            CHECK(gradient[j] == Approx(difference).epsilon(1e-5).margin(1e-7 * std::abs(value) / step));
          }
        }
}

TEST_CASE("a drive that saturates below a pulse says so, and the curve is drawn") {
  std::mt19937_64 random(4);
  Drive drive;
  drive.compression = 1.0;  // at most 300 kHz, so that 1.2 us is too short for pi
  Sample sample;
  take(sample, drive, even(0.0, 1.0, 41), 400, random);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  const Fit fit = fit_one(sample, prior, asked(kPi, 1.2e-6));
  REQUIRE(fit.outcome == FitOutcome::fitted);
  CHECK(std::isnan(fit.pulse_amplitude.at(0).value));
  CHECK(fit.pulse_amplitude[0].why == "the drive saturates below it");
  const std::vector<double> axis = even(0.0, 1.0, 11);
  std::vector<double> signal(11), low(11), high(11);
  REQUIRE(overlay(sample.batch, fit, axis, 1.96, signal, low, high));
  for (std::size_t i = 0; i < axis.size(); ++i) {
    CHECK(std::abs(signal[i] - drive.signal(axis[i])) < 0.05);  // 400 shots, 41 points for five parameters: sigma below 0.015
    CHECK(low[i] <= signal[i]);
    CHECK(signal[i] <= high[i]);
  }
}

TEST_CASE("nothing, half an oscillation and rotations beyond the sampling are no fit to be believed") {
  std::mt19937_64 random(5);
  Prior prior;
  prior.dead_time = {0.0, 20e-9};
  SECTION("nothing") {
    Drive drive;
    drive.atom.contrast = 0.0;
    Sample sample;
    take(sample, drive, even(0.0, 1.0, 41), 100, random);
    const Fit fit = fit_one(sample, prior);
    CHECK_FALSE((fit.outcome == FitOutcome::fitted && fit.quality.over_flat >= 30.0));
  }
  SECTION("half an oscillation only rises") {
    Drive drive;
    drive.per_amplitude = kTwoPi * 0.4 / drive.pulse_s;
    Sample sample;
    take(sample, drive, even(0.0, 1.0, 41), 100, random);
    const Fit fit = fit_one(sample, prior);
    CHECK_FALSE((fit.outcome == FitOutcome::fitted && fit.quality.over_monotone >= 30.0));
  }
  SECTION("an alias is not told from what it mirrors, and history tells") {
    Drive drive;
    drive.per_amplitude = kTwoPi * 18.2 / drive.pulse_s;  // the limit of 21 points in steps of 0.05 is 10 turns
    Sample sample;
    take(sample, drive, even(0.0, 1.0, 21), 400, random);
    const Fit fit = fit_one(sample, prior);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    CHECK(fit.generalised.value == Approx(kTwoPi * 1.8).epsilon(0.03));  // the least of those that fit alike, within the limit
  }
}

