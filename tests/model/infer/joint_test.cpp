// SPDX-License-Identifier: Apache-2.0
#include "model/infer/joint.hpp"

#include <Eigen/LU>
#include <cmath>
#include <deque>
#include <fstream>
#include <sstream>

#include "model/infer/joint_objective.hpp"
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

/// Scans that stay where they are, and what is known of them.
struct Scans {
  std::deque<Sample> samples;
  std::vector<JointScan> joint;

  Sample& add() { return samples.emplace_back(); }
  void know(const Prior& prior, double carrier = 0.0) { joint.push_back({samples.back().batch, prior, carrier}); }
};

JointFit together(const Scans& scans, const FitOptions& options = {}) {
  static FitWorkspace workspace;
  JointFit fit;
  fit_joint(scans.joint, options, fit, workspace);
  return fit;
}

Prior known(Dynamics dynamics, double dead_time_sigma = 20e-9) {
  Prior prior;
  prior.dead_time = {0.0, dead_time_sigma};
  prior.candidates = only(dynamics);
  prior.expect = Expected{kTwoPi * 10e3, kTwoPi * 1e6};
  return prior;
}

/// A flop and a line of one truth, with a line that lies `offset` from the carrier.
void flop_and_line(Scans& scans, const Truth& on_line, double offset, const Prior& prior, std::mt19937_64& random) {
  Truth flop = on_line;
  flop.detuning = -offset;
  take_flop(scans.add(), flop, even(0.5e-6, 30e-6, 40), 200, random);
  scans.know(prior);
  take_line(scans.add(), on_line, offset, kPi / on_line.rabi, even(kTwoPi * -250e3, kTwoPi * 250e3, 41), 200, random);
  scans.know(prior);
}

/// Information about (Omega, offset, dead time, floor and contrast of both scans) by central differences of Rabi's formula.
Eigen::MatrixXd rabi_information(const Scans& scans, const Truth& on_line, double offset, double dead_time_sigma) {
  const Eigen::VectorXd at = (Eigen::VectorXd(7) << on_line.rabi, offset, on_line.dead_time, on_line.floor, on_line.contrast, on_line.floor, on_line.contrast).finished();
  const Eigen::VectorXd step = (Eigen::VectorXd(7) << 1.0, 1.0, 1e-11, 1e-6, 1e-6, 1e-6, 1e-6).finished();
  const auto mean = [&](const Eigen::VectorXd& x, std::size_t scan, std::size_t i) {
    const auto& batch = scans.samples[scan].batch;
    Truth t;
    t.rabi = x[0];
    t.dead_time = x[2];
    t.floor = x[scan == 0 ? 3 : 5];
    t.contrast = x[scan == 0 ? 4 : 6];
    t.detuning = scan == 0 ? -x[1] : batch.axis[i] - x[1];
    return t.signal(scan == 0 ? batch.axis[i] : batch.pulse_length_s);
  };
  Eigen::MatrixXd information = Eigen::MatrixXd::Zero(7, 7);
  for (std::size_t scan = 0; scan < 2; ++scan)
    for (std::size_t i = 0; i < scans.samples[scan].axis.size(); ++i) {
      Eigen::VectorXd slope(7);
      for (int k = 0; k < 7; ++k) {
        Eigen::VectorXd up = at, down = at;
        up[k] += step[k], down[k] -= step[k];
        slope[k] = (mean(up, scan, i) - mean(down, scan, i)) / (2.0 * step[k]);
      }
      const double p = mean(at, scan, i);
      information += scans.samples[scan].weight[i] / (p * (1.0 - p)) * slope * slope.transpose();
    }
  information(2, 2) += 1.0 / (dead_time_sigma * dead_time_sigma);
  return information;
}

}  // namespace

TEST_CASE("two flops whose aliases differ tell the frequency together") {
  // Even grids of 2.0 us and 3.1 us: 310 kHz looks as 190, 690 and 810 kHz in the one, as 12.6, 335, 633 and 658 kHz in the other.
  std::mt19937_64 random(3);
  for (int turn = 0; turn < 4; ++turn) {
    Scans scans;
    const Truth truth{.rabi = kTwoPi * 310e3};
    take_flop(scans.add(), truth, even(2e-6, 60e-6, 30), 200, random);
    scans.know(known(Dynamics::undamped));
    take_flop(scans.add(), truth, even(3.1e-6, 62e-6, 20), 200, random);
    scans.know(known(Dynamics::undamped));
    for (const auto& sample : scans.samples) {
      const Fit alone = fit_one(sample, known(Dynamics::undamped));
      REQUIRE(alone.quality.rival);
      CHECK(alone.quality.rival->deviance_above < 25.0);
    }
    const JointFit fit = together(scans);
    REQUIRE(fit.fit.outcome == FitOutcome::fitted);
    // An error of 4.5 sigma comes once in 147,000.
    CHECK(std::abs(fit.fit.rabi.value - truth.rabi) < 4.5 * fit.fit.rabi.sigma);
    CHECK(fit.fit.rabi.sigma < 1e-3 * truth.rabi);
    CHECK((!fit.fit.quality.rival || fit.fit.quality.rival->deviance_above > 25.0));
    CHECK(fit.fit.quality.disagreement->p_value > 1e-4);
  }
}

TEST_CASE("a flop and a line give the bare Rabi frequency as well as both their informations allow") {
  std::mt19937_64 random(5);
  const Truth truth{.rabi = kTwoPi * 100e3};
  const double offset = kTwoPi * 15e3;
  Prior prior = known(Dynamics::undamped);
  prior.detuning = Known{0.0, kTwoPi * 20e3};
  int beyond = 0;
  for (int turn = 0; turn < 10; ++turn) {
    Scans scans;
    flop_and_line(scans, truth, offset, prior, random);
    FitOptions options;
    options.pulses = {{kPi, 1.0}};
    const JointFit fit = together(scans, options);
    REQUIRE(fit.fit.outcome == FitOutcome::fitted);
    REQUIRE(fit.line);
    const Eigen::MatrixXd bound = rabi_information(scans, truth, offset, prior.dead_time.sigma).inverse();
    // The information is taken where each says the truth is, which moves a sigma by 2 %; scatter counted by chance adds to it.
    const double widened = std::sqrt(fit.fit.quality.scatter);
    CHECK(fit.fit.rabi.sigma / std::sqrt(bound(0, 0)) > 0.95);
    CHECK(fit.fit.rabi.sigma / std::sqrt(bound(0, 0)) < 1.15 * widened);
    CHECK(fit.line->line_offset.sigma / std::sqrt(bound(1, 1)) > 0.95);
    CHECK(fit.line->line_offset.sigma / std::sqrt(bound(1, 1)) < 1.15 * widened);
    for (const auto& scan : scans.joint) {
      FitWorkspace work;
      Fit alone;
      infer::fit(scan.batch, {&scan.prior, 1}, {}, {&alone, 1}, work);
      CHECK(fit.fit.rabi.high - fit.fit.rabi.low < 0.6 * (alone.rabi.high - alone.rabi.low));
    }
    for (const double z : {(fit.fit.rabi.value - truth.rabi) / fit.fit.rabi.sigma, (fit.line->line_offset.value - offset) / fit.line->line_offset.sigma,
                           (fit.fit.pulse_length_s[0].value - kPi / truth.rabi) / fit.fit.pulse_length_s[0].sigma})
      beyond += std::abs(z) > 3.0 ? 1 : 0;
  }
  // Of 30 errors three or more beyond 3 sigma: once in 12,000 runs, were they independent.
  CHECK(beyond < 3);
}

TEST_CASE("scans that disagree are told from scans that agree") {
  std::mt19937_64 random(7);
  int improbable = 0;
  for (int turn = 0; turn < 40; ++turn) {
    Scans scans;
    for (const double last : {20e-6, 31e-6}) {
      take_flop(scans.add(), Truth{.rabi = kTwoPi * 100e3}, even(0.5e-6, last, 30), 200, random);
      scans.know(known(Dynamics::undamped));
    }
    const JointFit fit = together(scans);
    REQUIRE(fit.fit.quality.disagreement);
    improbable += fit.fit.quality.disagreement->p_value < 0.05 ? 1 : 0;
  }
  // At 5 % each, 9 or more of 40 come once in 10,000 runs (binomial); the test is a little cautious (the dead time's prior).
  CHECK(improbable < 9);
  for (const double other : {102e3, 130e3}) {  // beside it, and another mode altogether
    Scans scans;
    for (const double hz : {100e3, other}) {
      take_flop(scans.add(), Truth{.rabi = kTwoPi * hz}, even(0.5e-6, 30e-6, 40), 300, random);
      scans.know(known(Dynamics::undamped));
    }
    const JointFit fit = together(scans);
    REQUIRE(fit.fit.outcome == FitOutcome::fitted);
    REQUIRE(fit.fit.quality.disagreement);
    CHECK(fit.fit.quality.disagreement->p_value < 1e-6);
    REQUIRE(fit.parts.size() == 2);
    CHECK(std::max(fit.parts[0].strain, fit.parts[1].strain) == fit.fit.quality.disagreement->of_scan);
  }
}

TEST_CASE("flops on two carriers tell where the line is") {
  // Omega = 2 pi 100 kHz; the line 10 kHz above the second carrier, which is 30 kHz above the first.
  std::mt19937_64 random(9);
  Prior prior = known(Dynamics::undamped);
  Scans scans;
  for (const double carrier : {-30e3, 0.0}) {
    Truth truth{.rabi = kTwoPi * 100e3, .detuning = kTwoPi * (carrier - 10e3)};
    take_flop(scans.add(), truth, even(0.5e-6, 60e-6, 80), 400, random);
    prior.detuning = Known{kTwoPi * carrier, kTwoPi * 30e3};
    scans.know(prior, kTwoPi * carrier);
  }
  const JointFit fit = together(scans);
  REQUIRE(fit.fit.outcome == FitOutcome::fitted);
  CHECK(std::abs(fit.fit.rabi.value - kTwoPi * 100e3) < 4.5 * fit.fit.rabi.sigma);
  CHECK(fit.fit.rabi.sigma < kTwoPi * 1e3);
}

TEST_CASE("the joint objective's gradient is that of its value") {
  std::mt19937_64 random(13);
  Prior prior = known(Dynamics::undamped, 60e-9);
  prior.detuning = Known{0.0, kTwoPi * 20e3};
  prior.floor = Known{0.05, 0.02};
  prior.contrast = Known{0.9, 0.03};
  prior.motion = {dynamics::Mode{0.1, 0, 1.0}};
  for (const bool line : {true, false}) {
    Scans scans;
    const Truth truth{.rabi = kTwoPi * 100e3};
    flop_and_line(scans, truth, kTwoPi * 15e3, prior, random);
    if (!line) {
      scans.joint.pop_back();
      take_flop(scans.add(), truth, even(1e-6, 40e-6, 30), 100, random);
      scans.know(prior);
    }
    const auto priors = counted_once(scans.joint);
    std::vector<Readout> readouts;
    ObjectiveWorkspace work;
    for (const auto& scan : scans.joint) {
      readouts.push_back(scan.batch.site(0));
      work.reserve(scan.batch.points());
    }
    for (const Dynamics dynamics : kAllDynamics)
      for (const Lead lead : {Lead{Lead::Kind::bare}, Lead{Lead::Kind::generalised}, Lead{Lead::Kind::mean}, Lead{Lead::Kind::pulse_length, kPi, 0.9}}) {
        const JointObjective objective(scans.joint, readouts, priors, dynamics, lead, {}, work);
        JointPhysical p{.rabi = kTwoPi * 101e3, .offset = kTwoPi * 13e3, .detuning_square = 7e9, .dead_time = 12e-9};
        p.damping = 2e3;
        p.dephasing = 3e3;
        p.breadth = dynamics == Dynamics::thermal ? 2.0 : dynamics == Dynamics::doppler ? 3e9 : 0.01;
        p.ground = {0.06, 0.04, 0.0, 0.0};
        p.excited = {0.93, 0.95, 0.0, 0.0};
        const Vector x = objective.pack(p);
        double value = 0.0, up = 0.0, down = 0.0;
        Vector gradient;
        Matrix information;
        REQUIRE(objective.evaluate(x, value, &gradient, &information));
        CHECK(objective.unpack(x).rabi == Approx(p.rabi).epsilon(1e-12));
        for (int k = 0; k < objective.layout().count; ++k) {
          const double step = 1e-4 / std::sqrt(information(k, k));
          Vector moved = x;
          moved[k] = x[k] + step;
          REQUIRE(objective.evaluate(moved, up, nullptr, nullptr));
          moved[k] = x[k] - step;
          REQUIRE(objective.evaluate(moved, down, nullptr, nullptr));
          INFO(name(dynamics) << ", lead " << static_cast<int>(lead.kind) << ", parameter " << k << ", line " << line);
          // In units of a sigma; the difference's own error is the third derivative times 1e-9 and rounding of a value of 1e3.
          CHECK((up - down) / 2e-4 == Approx(gradient[k] / std::sqrt(information(k, k))).margin(1e-6).epsilon(1e-5));
        }
      }
  }
}

TEST_CASE("shared priors count once") {
  std::mt19937_64 random(17);
  const Prior prior = known(Dynamics::undamped);
  const auto value_at = [&](std::size_t count, double dead_time) {
    Scans scans;
    for (std::size_t i = 0; i < count; ++i) {
      take_flop(scans.add(), Truth{.rabi = kTwoPi * 100e3}, {}, 100, random);
      scans.know(prior);
    }
    const auto priors = counted_once(scans.joint);
    const std::vector<Readout> readouts(count);
    ObjectiveWorkspace work;
    const JointObjective objective(scans.joint, readouts, priors, Dynamics::undamped, {}, {}, work);
    JointPhysical p{.rabi = kTwoPi * 100e3, .dead_time = dead_time};
    p.ground.fill(0.1);
    p.excited.fill(0.9);
    double value = 0.0;
    REQUIRE(objective.evaluate(objective.pack(p), value, nullptr, nullptr));
    return value;
  };
  // No points: the value is the prior's, half a deviance of 1 at one sigma of 20 ns (less than 2 % off for its tail).
  CHECK(value_at(1, 20e-9) == Approx(0.5).epsilon(0.02));
  CHECK(value_at(4, 20e-9) == Approx(value_at(1, 20e-9)).epsilon(1e-9));
}

TEST_CASE("a flop and a line are fitted to SciPy's joint answer") {
  // tests/reference/infer_joint.py: Nelder-Mead on the sum of both likelihoods, brentq on the profile that it leaves.
  std::ifstream table(std::string(HALFTURN_BINARY_DIR) + "/reference/infer_joint.txt");
  REQUIRE(table);
  Scans scans;
  Prior prior = known(Dynamics::undamped, 40e-9);
  for (const bool line : {false, true}) {
    Sample& sample = scans.add();
    sample.axis = line ? even(kTwoPi * -250e3, kTwoPi * 250e3, 41) : even(0.5e-6, 30e-6, 40);
    std::string text;
    REQUIRE(std::getline(table, text));
    std::istringstream counts(text);
    for (double count = 0.0; counts >> count;) sample.observed.push_back(count);
    REQUIRE(sample.observed.size() == sample.axis.size());
    sample.weight.assign(sample.axis.size(), 200.0);
    sample.view(line ? Axis::detuning : Axis::duration);
    sample.batch.pulse_length_s = 5e-6;
    scans.know(prior);
  }
  double rabi = 0, offset = 0, dead = 0, floor = 0, top = 0, line_floor = 0, line_top = 0, deviance = 0, low = 0, high = 0;
  REQUIRE(table >> rabi >> offset >> dead >> floor >> top >> line_floor >> line_top >> deviance >> low >> high);
  const JointFit fit = together(scans);
  REQUIRE(fit.fit.outcome == FitOutcome::fitted);
  REQUIRE(fit.line);
  REQUIRE(fit.fit.quality.scatter == 1.0);
  // Nelder-Mead stops where the deviance no longer changes in the twelfth digit: 1e-6 of a sigma^2, 1e-3 of a sigma.
  const double sigma = fit.fit.rabi.sigma;
  CHECK(fit.fit.rabi.value == Approx(rabi).margin(2e-3 * sigma));
  CHECK(fit.line->line_offset.value == Approx(offset).margin(2e-3 * fit.line->line_offset.sigma));
  CHECK(fit.fit.dead_time_s.value == Approx(dead).margin(2e-3 * fit.fit.dead_time_s.sigma));
  CHECK(fit.fit.floor.value == Approx(floor).margin(2e-3 * fit.fit.floor.sigma));
  CHECK(fit.fit.contrast.value == Approx(top - floor).margin(2e-3 * fit.fit.contrast.sigma));
  // AICc = deviance + 2 k + 2 k (k + 1) / (n - k - 1), k = 7 of n = 81 points (N. Sugiura, Commun. Stat. A7, 13 (1978)).
  CHECK(fit.fit.candidates[0].aicc == Approx(deviance + 14.0 + 112.0 / 73.0).margin(1e-6));
  // The profile's ends are asked for to 1e-3 of the half width.
  CHECK(fit.fit.rabi.low == Approx(low).margin(4e-3 * sigma));
  CHECK(fit.fit.rabi.high == Approx(high).margin(4e-3 * sigma));
}
