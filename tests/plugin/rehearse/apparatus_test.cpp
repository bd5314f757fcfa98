// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/apparatus.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::rehearse;
using halfturn::constants::kPi;
using halfturn::constants::kTwoPi;

namespace {

ApparatusSettings steady() {
  ApparatusSettings settings;
  settings.rabi_walk = 0;
  settings.warm_up = 0;
  settings.line_walk_hz = 0;
  settings.mishap_probability = 0;
  return settings;
}

}  // namespace

// Seeds are fixed, so these pass or fail for good; what a new seed would do is said at each check.

TEST_CASE("Counts scatter as binomial ones") {
  // Mean n p and variance n p (1 - p) of the binomial distribution (any textbook). 4000 points of 50 shots: the mean is known to
  // 1/sqrt(4000) standard deviations, the variance to sqrt(2/4000); 4.5 times either is missed once in 150,000 seeds.
  Apparatus apparatus(steady(), 7, 0);
  for (const double length_s : {1.1e-6, 2.0e-6, 3.6e-6}) {
    const double p = apparatus.bright_probability(0, length_s, 80e6);
    const auto scan = apparatus.take_flop(0, std::vector<double>(4000, length_s), 50, 80e6);
    double sum = 0;
    double squares = 0;
    for (const auto count : scan.counts) {
      sum += static_cast<double>(count);
      squares += std::pow(static_cast<double>(count) - 50 * p, 2);
    }
    const double variance = 50 * p * (1 - p);
    CHECK(std::abs(sum / 4000 - 50 * p) < 4.5 * std::sqrt(variance / 4000));
    CHECK(std::abs(squares / 4000 / variance - 1) < 4.5 * std::sqrt((2 + 1 / variance) / 4000));
  }
}

TEST_CASE("A flop shows floor, contrast, dead time and the decay of the level") {
  // Rabi 1937 without decay; Torrey 1949 with it: rho_ee = O^2/(2O^2+G^2) [1 - e^(-3Gt/4) (cos Lt + 3G/4L sin Lt)].
  auto settings = steady();
  const double length_s = 2.9e-6;
  const double time = length_s - settings.dead_time_s;
  const double rabi = kTwoPi * settings.rabi_hz;
  const double decay = settings.decay_per_s;
  const double beat = std::sqrt(rabi * rabi - decay * decay / 16);
  const double damped = rabi * rabi / (2 * rabi * rabi + decay * decay) *
                        (1 - std::exp(-3 * decay * time / 4) * (std::cos(beat * time) + 3 * decay / 4 / beat * std::sin(beat * time)));
  CHECK(Apparatus(settings, 1, 0).bright_probability(0, length_s, settings.line_hz) == Approx(0.017 + 0.94 * damped).margin(1e-9));
  CHECK(Apparatus(settings, 1, 0).bright_probability(0, 5e-9, settings.line_hz) == Approx(0.017).margin(1e-12));
  settings.decay_per_s = 0;
  const double undamped = std::pow(std::sin(rabi * time / 2), 2);
  CHECK(Apparatus(settings, 1, 0).bright_probability(0, length_s, settings.line_hz) == Approx(0.017 + 0.94 * undamped).margin(1e-9));
}

TEST_CASE("A line scan has its width and its centre where the line is") {
  // A square pi pulse falls to half at +-0.798685355/(2 t) (computed with SciPy from Rabi 1937).
  auto settings = steady();
  settings.decay_per_s = 0;
  settings.floor = 0;
  settings.contrast = 1;
  settings.dead_time_s = 0;
  const Apparatus apparatus(settings, 3, 0);
  const double pulse_s = 0.5 / settings.rabi_hz;
  CHECK(apparatus.bright_probability(0, pulse_s, settings.line_hz) == Approx(1).margin(1e-9));
  for (const double side : {-1.0, 1.0}) {
    CHECK(apparatus.bright_probability(0, pulse_s, settings.line_hz + side * 0.798685355 / 2 / pulse_s) == Approx(0.5).margin(1e-8));
  }
}

TEST_CASE("What is true drifts as the settings say, whatever scans are taken") {
  // A random walk of standard deviation s after an hour has s sqrt(T) after T hours. 400 nights: the variance is known to
  // sqrt(2/400), and 4.5 times that is missed once in 150,000 seeds.
  ApparatusSettings settings;
  double rabi = 0;
  double line = 0;
  for (std::uint64_t seed = 0; seed < 400; ++seed) {
    const Truth end = Apparatus(settings, seed, 4 * 3600).truth(4 * 3600);
    const double warm = 1 - std::exp(-4 * 3600 / settings.warm_up_s);
    rabi += std::pow(std::log(end.rabi_hz / settings.rabi_hz) - std::log1p(settings.warm_up) * warm, 2) / 400;
    line += std::pow(end.line_hz - settings.line_hz, 2) / 400;
  }
  CHECK(std::abs(rabi / (0.01 * 0.01 * 4) - 1) < 4.5 * std::sqrt(2.0 / 400));
  CHECK(std::abs(line / (700.0 * 700.0 * 4) - 1) < 4.5 * std::sqrt(2.0 / 400));

  Apparatus scanned(settings, 11, 3600);
  scanned.take_flop(0, {1e-6, 2e-6}, 100, 80e6);
  CHECK(scanned.truth(1234).rabi_hz == Apparatus(settings, 11, 3600).truth(1234).rabi_hz);
  CHECK(scanned.truth(0).rabi_hz == settings.rabi_hz);
}

TEST_CASE("Sudden changes come at random moments, as often and as large as the settings say") {
  // Compound Poisson process (Campbell's theorem): the logarithm has variance n s^2 for a mean of n jumps of standard deviation s,
  // and its square the variance (2 n^2 + 3 n) s^4. 400 nights; 4.5 standard errors.
  auto settings = steady();
  settings.jumps_per_hour = 1;
  double variance = 0;
  for (std::uint64_t seed = 0; seed < 400; ++seed) {
    const Truth end = Apparatus(settings, seed, 4 * 3600).truth(4 * 3600);
    variance += std::pow(std::log(end.rabi_hz / settings.rabi_hz), 2) / 400;
  }
  CHECK(std::abs(variance / (4 * 0.06 * 0.06) - 1) < 4.5 * std::sqrt((2 + 3.0 / 4) / 400));
}

TEST_CASE("Equal seeds give equal counts, others do not") {
  const std::vector<double> lengths_s = {1e-6, 2e-6, 3e-6, 4e-6, 5e-6, 6e-6};
  const auto counts = [&](std::uint64_t seed) { return Apparatus({}, seed, 3600).take_flop(600, lengths_s, 1000, 80e6).counts; };
  CHECK(counts(5) == counts(5));
  CHECK(counts(5) != counts(6));
  CHECK(counts(5) != counts(5 + (1ull << 32)));
}

TEST_CASE("Mishaps come as often as asked for and take the light away") {
  // 2000 scans at 20 %: 400 with a standard deviation of 17.9; 4.5 of them are missed once in 150,000 seeds.
  auto settings = steady();
  settings.mishap_probability = 0.2;
  settings.floor = 0;
  Apparatus apparatus(settings, 9, 0);
  const std::vector<double> lengths_s(12, 4e-6);
  int spoilt = 0;
  for (int i = 0; i < 2000; ++i) {
    const auto scan = apparatus.take_flop(0, lengths_s, 100, 80e6);
    const auto dark = std::count(scan.counts.begin(), scan.counts.end(), 0);
    spoilt += scan.mishap == Mishap::none ? 0 : 1;
    if (scan.mishap == Mishap::none) CHECK(dark == 0);
    if (scan.mishap == Mishap::dark) CHECK(dark == 12);
    if (scan.mishap == Mishap::unlocked) CHECK(scan.counts.back() == 0);
    if (scan.mishap == Mishap::dropout) CHECK(dark >= 1);
  }
  CHECK(std::abs(spoilt - 400) < 81);
}

TEST_CASE("An ensemble acts shot by shot") {
  // Gaussian spread s of the coupling: P = (1 - cos(a) exp(-(s a)^2/2))/2. 40,000 shots: 4.5 standard errors, once in 150,000.
  auto settings = steady();
  settings.decay_per_s = 0;
  settings.dead_time_s = 0;
  settings.ensemble.rabi_spread = 0.05;
  Apparatus apparatus(settings, 2, 0);
  const double length_s = 2 / settings.rabi_hz;
  const auto scan = apparatus.take_flop(0, {length_s}, 40000, 80e6);
  const double p = 0.017 + 0.94 * 0.5 * (1 - std::exp(-std::pow(0.05 * 4 * kPi, 2) / 2));
  CHECK(std::abs(static_cast<double>(scan.counts[0]) / 40000 - p) < 4.5 * std::sqrt(p * (1 - p) / 40000));
}

TEST_CASE("The rotation is the generalised Rabi frequency times the length less the dead time") {
  const Apparatus apparatus(steady(), 1, 0);
  CHECK(apparatus.rotation(0, 4.01e-6, 80e6) == Approx(kPi).margin(1e-12));
  CHECK(apparatus.rotation(0, 4.01e-6, 80e6 + 125e3) == Approx(kPi * std::sqrt(2.0)).margin(1e-9));
}
