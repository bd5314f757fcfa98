// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/limits.hpp"

#include <cmath>
#include <sstream>

#include <nlohmann/json.hpp>

#include "model/quantity/constants.hpp"
#include "tests/campaign/held.hpp"
#include "tests/campaign/imposter.hpp"
#include "tests/campaign/targets.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::campaign;
using constants::kPi;
using constants::kTwoPi;

namespace {

double phi(double z) { return 0.5 * std::erfc(-z / std::sqrt(2.0)); }

Apart normal_shift(double shift) {
  Apart apart;
  apart.add_normal(shift);
  return apart;
}

double log_binomial(int k, int n, double p) {
  return std::lgamma(n + 1.0) - std::lgamma(k + 1.0) - std::lgamma(n - k + 1.0) + k * std::log(p) + (n - k) * std::log1p(-p);
}

/// Of one binomial reading, the most powerful test itself: the largest counts (where p_true > p_imposter), the last by chance.
double exact_power(int n, double p_true, double p_imposter, double size) {
  double left = size, power = 0;
  for (int k = n; k >= 0 && left > 0; --k) {
    const double under_imposter = std::exp(log_binomial(k, n, p_imposter)), part = std::min(1.0, left / under_imposter);
    power += part * std::exp(log_binomial(k, n, p_true));
    left -= part * under_imposter;
  }
  return power;
}

/// A flop with a Doppler spread of so much of its coupling.
Case doppler_of(double shots, double spread) {
  Case c = draw(*family_named("clean"), 1, 0);
  c.drive = config::Drive{};
  c.truth = Apparatus{};
  c.truth.rabi = kTwoPi * 20e3;
  c.truth.ground = 0.05;
  c.truth.excited = 0.9;
  c.truth.ensemble.detuning_spread_hz = spread * 20e3;
  c.drive.dead_time = infer::Known{0, 10e-9};
  recalibrate::Pulse pi;
  pi.name = "pi";
  pi.angle_rad = kPi;
  c.drive.pulses = {pi};
  c.scan.axis.clear();
  for (int i = 0; i < 60; ++i) c.scan.axis.push_back(4e-6 * i);  // 4.7 cycles
  c.scan.weight = {std::vector<double>(60, shots)};
  c.scan.observed = {std::vector<double>(60, 0.0)};
  c.scan.references.reset();
  return made_by(c, c.truth);
}

const Imposter* by(const std::vector<Imposter>& all, infer::Dynamics dynamics) {
  for (const auto& one : all)
    if (one.dynamics == dynamics) return &one;
  return nullptr;
}

}  // namespace

TEST_CASE("between two normal means the most powerful test is that of Neyman and Pearson") {
  // Their paper's first example: mean shifted by s standard deviations, power Phi(s - z) (Phil. Trans. R. Soc. A 231, 289 (1933)).
  // 2.0537 and 1.6449 are z of 2 % and 5 % (any table of the normal distribution).
  for (const double shift : {0.0, 0.3, 1.0, 2.5, 6.0}) {
    CHECK(power(normal_shift(shift), 0.02) == Approx(phi(shift - 2.053749)).margin(1e-6));
    CHECK(power(normal_shift(shift), 0.05) == Approx(phi(shift - 1.644854)).margin(1e-6));
    CHECK(normal_shift(shift).deviance() == Approx(shift * shift));
  }
  CHECK(power(normal_shift(1), 0) == 0);
  CHECK(power(normal_shift(1), 1) == 1);
  CHECK(power(Apart{}, 0.37) == 0.37);
}

TEST_CASE("between two binomials the power is that of the test on the counts themselves") {
  // The sum over counts, the last one randomised, needs no normal law; with hundreds of counts the law is good to a few thousandths (Berry
  // and Esseen: 0.56 / sqrt(n p (1-p)) at most, far more than is seen).
  struct {
    int n;
    double p, q;
  } const pairs[] = {{1000, 0.53, 0.5}, {2000, 0.33, 0.3}, {5000, 0.105, 0.1}, {4000, 0.82, 0.8}};
  for (const auto& [n, p, q] : pairs) {
    Apart apart;
    apart.add_binomial(n, p, q);
    for (const double size : {0.02, 0.1, 0.5}) CHECK(power(apart, size) == Approx(exact_power(n, p, q, size)).margin(0.006));
  }
}

TEST_CASE("no power contradicts the data-processing inequality") {
  // Of any event, b ln(b/a) + (1-b) ln((1-b)/(1-a)) is at most the Kullback-Leibler distance (T. M. Cover, J. A. Thomas, Elements of
  // Information Theory, 2nd ed. (2006), section 2.8), no normal law needed.
  for (const double shots : {200.0, 1000.0, 4000.0})
    for (const double step : {0.005, 0.02, 0.05})
      for (const double a : {0.02, 0.1, 0.4}) {
        Apart apart;
        for (int i = 0; i < 10; ++i) apart.add_binomial(shots, 0.2 + 0.05 * i + step, 0.2 + 0.05 * i);
        const double b = std::min(power(apart, a), 1 - 1e-12);
        CHECK(b * std::log(b / a) + (1 - b) * std::log((1 - b) / (1 - a)) <= apart.mean_true + 1e-9);
        CHECK(b > a);
      }
}

TEST_CASE("an interval reaches as far as its length and its coverage let it") {
  CHECK(reach(0.95, 0.95) == Approx(1.959964).margin(1e-5));       // nothing to spare
  CHECK(reach(0.6827, 0.6827) == Approx(1.0).margin(1e-3));
  for (const double stretch : {1.0, 1.5, 3.0}) {
    const double far = reach(0.91, 0.975, stretch), length = 2 * stretch * 2.241403;  // z of 0.9875
    CHECK(phi(far) + phi(length - far) - 1 == Approx(0.91).margin(1e-5));
    CHECK(far > length / 2);
  }
}

TEST_CASE("what nothing tells apart is missed by as much as its answer is off, what everything does is not") {
  const Apart alike, plain = normal_shift(40);
  const Intervals intervals{2, 0.95};
  const double strays = (1.05 * 1.05 - 1) / 9;  // beyond 3 standard deviations
  CHECK(astray(3, 0.95) == Approx(strays));
  CHECK(astray(0.1, 0.95) == Approx(0.05));
  CHECK(most_covered(alike, 5, intervals) == Approx(phi(-3) + strays));
  CHECK(least_missed(alike, 5, intervals, 0.02) == Approx(1 - 0.02 - phi(-3) - strays));
  CHECK(most_covered(alike, 1, intervals) == Approx(phi(1) + 0.05));
  for (const double away : {5.0, 30.0, 1000.0}) {
    CHECK(most_covered(plain, away, intervals) == Approx(1));
    CHECK(least_missed(plain, away, intervals, 0.02) == Approx(0).margin(1e-12));
  }
  double last = 0;
  for (const double shift : {0.0, 0.5, 1.0, 2.0, 4.0}) {  // the plainer, the more may be covered
    const double covered = most_covered(normal_shift(shift), 4, intervals);
    CHECK(covered > last);
    last = covered;
  }
}

TEST_CASE("a wrong answer is forced where the imposter's is far off and nothing tells them apart") {
  // Held against by 100 = (10 sigma)^2, off by 1 rad: all stay on the imposter's side, and all but the refusals are wrong.
  for (const auto whose : {Answers::any, Answers::maximum}) {
    CHECK(least_wrong(Apart{}, 1, 100, 0.02, whose) == Approx(0.98).margin(1e-4));
    CHECK(least_wrong(normal_shift(40), 1, 100, 0.02, whose) == Approx(0).margin(1e-12));
    CHECK(least_wrong(Apart{}, 0.05, 100, 0.02, whose) == 0);                // off by no more than is allowed
    CHECK(least_wrong(normal_shift(2), 1, 400, 0.02, whose) == Approx(1 - phi(2 - 2.053749)).margin(1e-5));
  }
  // Held against by 25: half of the maxima are, and of these the refusals are taken.
  CHECK(least_wrong(Apart{}, 1, 25, 0.02, Answers::maximum) == Approx(0.5 - 0.02));
  // An answer 75 mrad off may be put half way; one at the maximum may not.
  CHECK(least_wrong(Apart{}, 0.075, 400, 0.02, Answers::any) == 0);
  CHECK(least_wrong(Apart{}, 0.075, 400, 0.02, Answers::maximum) > 0.9);
}

TEST_CASE("wrong answers under the likelihood ratio test come out as bounded, by simulation") {
  // The situation of least_wrong drawn: the maximum about the imposter's answer, the ratio independent of it; refusals by the ratio within
  // what would be wrong. 2e5 draws: standard error 0.0011, so 6e-3 is passed by chance less than once in a million.
  const double shift = 1.2, held = 49, off = 0.2, refused = 0.02, s = off / std::sqrt(held);
  std::mt19937_64 random(5);
  std::normal_distribution<double> normal;
  const double q = phi(std::min(7.0 - 5.0, (off - 0.05) / s)), z = 1.959964;  // of refused / q = 0.0205, about 2.044
  REQUIRE(refused / q < 0.0250);
  int wrong = 0, imposters_refused = 0;
  constexpr int kDraws = 200'000;
  const double threshold = z + 0.0838;  // z of 0.0205
  for (int i = 0; i < kDraws; ++i) {
    const double maximum = s * normal(random), ratio = normal(random);
    const bool far = std::abs(maximum - off) > std::max(5 * s, 0.05);
    imposters_refused += far && ratio > threshold;
    wrong += far && ratio + shift <= threshold;
  }
  CHECK(static_cast<double>(imposters_refused) / kDraws == Approx(refused).margin(0.002));
  CHECK(static_cast<double>(wrong) / kDraws == Approx(least_wrong(normal_shift(shift), off, held, refused, Answers::maximum)).margin(0.006));
}

TEST_CASE("an imposter's distance is the deviance that its fit leaves, and goes with the shots") {
  // Two computations that share nothing: the integrator's counts against one another, and the deviance of a fit by the closed forms.
  const Case few = doppler_of(100, 0.15), many = doppler_of(400, 0.15);
  const auto little = imposters_of(few), much = imposters_of(many);
  for (const auto dynamics : {infer::Dynamics::undamped, infer::Dynamics::dephasing, infer::Dynamics::spread}) {
    const auto *a = by(little, dynamics), *b = by(much, dynamics);
    REQUIRE(a != nullptr);
    REQUIRE(b != nullptr);
    CHECK(b->apart.deviance() > 2 * a->apart.deviance());
    Case alone = at_expectation(many);
    alone.drive.dynamics = infer::DynamicsSet::none();
    alone.drive.dynamics->add(dynamics);
    const auto fit = fit_of(alone);
    CHECK(b->apart.deviance() == Approx(fit.quality.deviance).epsilon(0.1).margin(0.02));
  }
  const auto* same = by(much, infer::Dynamics::doppler);
  REQUIRE(same != nullptr);
  CHECK(same->apart.deviance() == Approx(0).margin(1e-3));
  CHECK(best_pulse(same->as.truth, kPi) == Approx(best_pulse(many.truth, kPi)).epsilon(1e-4));
}

TEST_CASE("noise raises the limit: a Doppler spread unseen with few shots is seen with many") {
  // The damping of a spread d of the detuning goes as d^4, its shift of the frequency as d^2 (scan_objective.hpp, doppler_shift), so where the
  // damping shows, both are told; where it does not, the shift remains.
  const auto covered = [](double shots) {
    ScanLimit limit;
    for (const auto& one : imposters_of(doppler_of(shots, 0.1)))
      if (one.dynamics == infer::Dynamics::undamped)
        limit.contests.push_back({one.dynamics, one.apart, std::abs(best_pulse(one.as.truth, kPi) - 25e-6) / one.sigma});
    REQUIRE(limit.contests.size() == 1);  // within a deviance of 150
    return most_covered(limit, Level::wide, 1).most;
  };
  CHECK(covered(2000) < 0.5);
  CHECK(covered(20'000) > 0.99);
}

TEST_CASE("longer intervals are the price of a coverage") {
  ScanLimit scan;
  scan.contests = {{infer::Dynamics::undamped, normal_shift(0.3), 6}};
  double last = 0;
  for (const double stretch : {1.0, 1.3, 1.6}) {
    const auto covered = most_covered(scan, Level::wide, stretch);
    CHECK(covered.most > last);
    CHECK(covered.by == &scan.contests.front());
    last = covered.most;
  }
  CHECK(most_covered(scan, Level::wide, 3).most == 1);
}

TEST_CASE("of frequencies that fit alike an interval holds one") {
  // An even grid tells f and the sampling rate less f no better than by chance (Nyquist, Trans. AIEE 47, 617 (1928)): 0.95 / 2.
  for (std::uint64_t index = 0; index < 6; ++index) {
    const auto scan = limit_of(draw(*family_named("alias_inside"), 3, index), *family_named("alias_inside"));
    CHECK(scan.alike == 2);
    CHECK(most_covered(scan, Level::wide, 1).most == Approx(0.475));
    CHECK(most_covered(scan, Level::wide, 50).most == Approx(0.475));
  }
}

TEST_CASE("limits of families are told for the scans of the campaign") {
  std::vector<const Family*> wanted = {family_named("dead_time_beyond"), family_named("two_component")};
  for (const auto* family : wanted) CHECK(has_limits(*family));
  CHECK_FALSE(has_limits(*family_named("clean")));
  const auto found = limits({40, {2}, 2}, wanted);
  REQUIRE(found.size() == 4);
  const auto ran = run({40, {2}, 1}, wanted);
  for (std::size_t i = 0; i < 2; ++i) {  // narrow and wide intervals of the first
    CHECK(found[i].scans == ran.rows[0].converged);
    CHECK(found[i].nobody < found[i].target);
    CHECK(found[i].nobody >= found[i].reachable);
    CHECK(found[i].stretch > 1.1);
  }
  CHECK(found[1].measured * static_cast<double>(found[1].scans) == Approx(ran.rows[0].in_95));
  CHECK(found[2].figure == Figure::wrong);
  CHECK(found[2].nobody <= found[2].reachable);
  CHECK(found[3].scans == ran.rows[1].used_converged);
  std::stringstream table, json;
  print_limits(table, found);
  print_limits_json(json, found);
  CHECK(table.str().find("two_component         used in 95") != std::string::npos);
  CHECK(nlohmann::json::parse(json.str()).size() == 4);
}
