// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "tests/model/dynamics/ensemble_support.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::dynamics;
using Kind = Ensemble::Kind;

namespace {

constexpr double Rates::* kMembers[kRateCount] = {&Rates::rabi, &Rates::detuning, &Rates::decay, &Rates::loss, &Rates::dephasing};

/// Differences of fourth order; forward ones where `x` is less than a step above its least value, 0.
template <class Function>
std::vector<double> slope(const Function& f, double x, bool from_zero) {
  const double h = 2e-3;
  const bool forward = from_zero && x < 2 * h;
  const double at[] = {forward ? 0 : -h, forward ? h : -0.5 * h, forward ? 2 * h : 0.5 * h, forward ? 3 * h : h,
                       forward ? 4 * h : 0};
  const double central[] = {1.0 / 6, -8.0 / 6, 8.0 / 6, -1.0 / 6, 0}, onward[] = {-25.0 / 12, 4, -3, 4.0 / 3, -0.25};
  std::vector<double> sum;
  for (int i = 0; i < 5; ++i) {
    const std::vector<double> values = f(x + at[i]);
    sum.resize(values.size());
    for (std::size_t k = 0; k < sum.size(); ++k) sum[k] += (forward ? onward : central)[i] * values[k] / h;
  }
  return sum;
}

const Mode kCarrier[] = {{0.3, 0, 1}}, kRed[] = {{0.3, -1, 1}}, kBlue2[] = {{0.35, 2, 1}},
           kTwo[] = {{0.3, 0, 1}, {0.25, 1, 0.5}};

const std::vector<Ensemble> kEnsembles = {
    {Kind::spread, 0.0, false, {}},        {Kind::spread, 0.02, false, {}},      {Kind::spread, 0.3, false, {}},
    {Kind::doppler, 0.0, false, {}},       {Kind::doppler, 0.1, false, {}},      {Kind::doppler, 1.5, false, {}},
    {Kind::cloud, 0.0, false, {}},         {Kind::cloud, 0.2, false, {}},        {Kind::cloud, 0.4, true, {}},
    {Kind::cloud, 0.9, false, {}},         {Kind::thermal, 0.0, false, kCarrier}, {Kind::thermal, 0.4, false, kCarrier},
    {Kind::thermal, 3.0, false, kCarrier}, {Kind::thermal, 0.0, false, kRed},    {Kind::thermal, 1.2, false, kRed},
    {Kind::thermal, 1.2, false, kBlue2},   {Kind::thermal, 0.7, false, kTwo},
};

const std::vector<Rates> kKinds = {
    {2.0, 0, 0, 0, 0}, {2.0, 0.7, 0, 0, 0}, {2.0, 0, 0.3, 0, 0}, {2.0, 0.7, 0.2, 0.3, 0.1}, {0.2, 0.1, 1.0, 0.5, 0},
};

void compare(const std::vector<double>& found, const std::vector<double>& expected, double margin) {
  for (std::size_t k = 0; k < found.size(); ++k) {
    INFO("point " << k);
    CHECK(found[k] == Approx(expected[k]).margin(margin).epsilon(0));
  }
}

}  // namespace

// Differences of means with other numbers of members see their errors, 1e-11, over the step, 2e-3, eight times: 4e-8.
TEST_CASE("derivatives of mean scans are those of their populations") {
  EnsembleWorkspace workspace;
  const std::vector<double> even = {-0.3, 0.7, 1.7, 2.7, 3.7, 4.7}, uneven = {0.9, 4.1, -0.2, 2.2};
  for (const Ensemble& ensemble : kEnsembles)
    for (const Rates& rates : kKinds)
      for (bool line : {false, true})
        for (bool damping : {false, true})
          for (const auto& axis : {even, uneven}) {
            const Start start{line ? Prepared::ground : Prepared::excited, 0.07, LostReads::bright};
            const double other = line ? 2.3 : 0.1;
            const auto population = [&](const Rates& r, const Ensemble& e, double o) {
              return tests::mean_scan(r, e, start, axis, o, line, damping, workspace).rows[0];
            };
            const auto found = tests::mean_scan(rates, ensemble, start, axis, other, line, damping, workspace);
            INFO("kind " << static_cast<int>(ensemble.kind) << " parameter " << ensemble.parameter << " rabi " << rates.rabi
                         << " detuning " << rates.detuning << " decay " << rates.decay << (line ? " line" : " flop"));
            for (int rate = 0; rate < (damping ? kRateCount : 2); ++rate) {
              INFO("by rate " << rate);
              compare(found.rows[1 + rate], slope([&](double x) {
                        Rates changed = rates;
                        changed.*kMembers[rate] = x;
                        return population(changed, ensemble, other);
                      }, rates.*kMembers[rate], rate >= kByDecay), 4e-8);
            }
            {
              INFO("by parameter");
              compare(found.rows[7], slope([&](double x) {
                        Ensemble changed = ensemble;
                        changed.parameter = x;
                        return population(rates, changed, other);
                      }, ensemble.parameter, true), ensemble.parameter == 0 ? 4e-7 : 4e-8);
            }
            INFO("by length");
            auto expected = slope([&](double x) { return population(rates, ensemble, x); }, other, false);
            if (!line)
              for (double& value : expected) value = -value;
            compare(found.rows[6], expected, 4e-8);
          }
}

// Over 40 cycles differences would need small steps. Closed forms, of the spread's mean exp(-(s theta)^2/2) cos theta and, for a
// cloud's mean C(theta), theta C' = kappa (cos theta - C) by parts, serve instead.
TEST_CASE("derivatives of mean flops hold over many cycles") {
  EnsembleWorkspace workspace;
  std::vector<double> axis;
  for (int k = 1; k <= 1000; ++k) axis.push_back(0.25 * k);
  const double longest = axis.back();
  for (bool damping : {false, true}) {  // with derivatives by a damping, closed forms do not serve
    for (double s : {0.002, 0.02, 0.1}) {
      const auto found = tests::mean_scan({1, 0, 0, 0, 0}, {Kind::spread, s, false, {}}, {}, axis, 0, false, damping, workspace);
      for (std::size_t k = 0; k < axis.size(); k += 7) {
        const double t = axis[k], size = std::exp(-0.5 * s * s * t * t);
        const double slope = 0.5 * size * (std::sin(t) + s * s * t * std::cos(t));
        INFO("spread " << s << " at " << t << " damping " << damping);
        CHECK(found.rows[6][k] == Approx(slope).margin(1e-9).epsilon(0));
        CHECK(found.rows[1][k] == Approx(t * slope).margin(1e-9 * longest).epsilon(0));
        CHECK(found.rows[7][k] == Approx(0.5 * size * s * t * t * std::cos(t)).margin(1e-9 * longest).epsilon(0));
      }
    }
    for (double ratio : {0.05, 0.3, 0.8}) {
      const double kappa = 0.5 / (ratio * ratio);
      const auto found = tests::mean_scan({1, 0, 0, 0, 0}, {Kind::cloud, ratio, false, {}}, {}, axis, 0, false, damping, workspace);
      for (std::size_t k = 0; k < axis.size(); k += 7) {
        const double t = axis[k], mean = 1 - 2 * found.rows[0][k], slope = -0.5 * kappa * (std::cos(t) - mean) / t;
        INFO("cloud " << ratio << " at " << t << " damping " << damping);
        CHECK(found.rows[6][k] == Approx(slope).margin(1e-9 * std::max(1.0, kappa / t)).epsilon(0));
        CHECK(found.rows[1][k] == Approx(t * slope).margin(1e-9 * std::max(longest, kappa)).epsilon(0));
      }
    }
  }
}

// Levels one by one on a short scan, merged on a long one.
TEST_CASE("derivatives of thermal flops are the same by levels and by merged members") {
  EnsembleWorkspace workspace;
  std::vector<double> axis;
  for (int k = 0; k < 2000; ++k) axis.push_back(0.05 * k);
  const std::vector<double> few = {axis[40], axis[1999], axis[777]};
  const Mode mode{0.15, 1, 1};
  const Ensemble ensemble{Kind::thermal, 15.0, false, {&mode, 1}};
  const auto many = tests::mean_scan({1, 0, 0, 0, 0}, ensemble, {}, axis, 0, false, false, workspace);
  CHECK(workspace.members.size() < 200);
  const auto one = tests::mean_scan({1, 0, 0, 0, 0}, ensemble, {}, few, 0, false, false, workspace);
  CHECK(workspace.members.size() > 400);
  const std::size_t at[] = {40, 1999, 777};
  for (int row : {0, 1, 6, 7})
    for (std::size_t k = 0; k < 3; ++k)
      CHECK(many.rows[row][at[k]] == Approx(one.rows[row][k]).margin(row == 1 ? 1e-8 : 1e-10).epsilon(0));
}
