// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <functional>

#include "tests/model/dynamics/reference_table.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::dynamics;

namespace {

constexpr double Rates::* kMembers[kRateCount] = {&Rates::rabi, &Rates::detuning, &Rates::decay, &Rates::loss, &Rates::dephasing};

// All kinds of dynamics, in units of a rate of order 1; every one is met with both starts and both readings of loss.
const std::vector<Rates> kKinds = {
    {2.0, 0, 0, 0, 0},      {2.0, 0.7, 0, 0, 0},      {2.0, 0, 0.3, 0, 0},     {2.0, 0.7, 0.3, 0, 0},    {2.0, 0, 0, 0, 0.3},
    {2.0, -0.7, 0, 0, 0.3}, {2.0, 0, 0, 0.3, 0},      {2.0, 0.7, 0, 0.3, 0},   {2.0, 0.7, 0.2, 0.3, 0},  {2.0, 0.7, 0.2, 0.3, 0.1},
    {0.2, 0, 1.0, 0, 0},    {0.25, 0, 1.0, 0, 0},     {0.5, 0, 0, 1.0, 0},     {0.5, 1e-3, 0, 1.0, 0},   {0.1, 0.05, 1.0, 0, 1.0},
    {0.01, 3.0, 1.0, 0, 0}, {2.0, 0.7, 1e-7, 0, 0},   {0.2, 0.1, 1.0, 0.5, 0}, {0.3, 0.02, 0, 0.4, 0.9},
};

/// (f(x + h) - f(x - h))/2h, improved once by Richardson; its error is of order h^4 and 1e-15/h.
template <class Function>
double difference(const Function& f, double x, double h) {
  const auto central = [&](double step) { return (f(x + step) - f(x - step)) / (2 * step); };
  return (4 * central(0.5 * h) - central(h)) / 3;
}

/// One-sided where a damping begins at 0: weights of fourth order at 0, h, ..., 4h.
template <class Function>
double forward(const Function& f, double h) {
  return (-25 * f(0.0) + 48 * f(h) - 36 * f(2 * h) + 16 * f(3 * h) - 3 * f(4 * h)) / (12 * h);
}

double slope(const Rates& rates, int rate, const std::function<double(const Rates&)>& value) {
  const auto at = [&](double x) {
    Rates changed = rates;
    changed.*kMembers[rate] = x;
    return value(changed);
  };
  const double x = rates.*kMembers[rate], h = 2e-3;
  return rate >= kByDecay && x < h ? forward([&](double step) { return at(x + step); }, h) : difference(at, x, h);
}

}  // namespace

TEST_CASE("derivatives of a duration scan are those of its populations") {
  const std::vector<double> lengths = {0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 3.5, 4.0, 4.5}, uneven = {0.3, 4.1, 0.0, 2.2};
  for (const Rates& rates : kKinds)
    for (auto prepared : {Prepared::ground, Prepared::excited})
      for (auto reads : {LostReads::dark, LostReads::bright})
        for (const auto& length_s : {lengths, uneven}) {
          const Start start{prepared, 0.07, reads};
          const auto found = tests::evaluate(rates, start, length_s);
          INFO("rabi " << rates.rabi << " detuning " << rates.detuning << " decay " << rates.decay << " loss " << rates.loss
                       << " dephasing " << rates.dephasing);
          for (std::size_t k = 0; k < length_s.size(); ++k) {
            const double t = length_s[k];
            for (int rate = 0; rate < kRateCount; ++rate) {
              INFO("rate " << rate << " length " << t);
              const double expected = slope(rates, rate, [&](const Rates& r) { return population(r, start, t); });
              CHECK(found.rows[1 + rate][k] == Approx(expected).margin(2e-8).epsilon(0));
            }
            if (t == 0) continue;
            const double expected = difference([&](double x) { return population(rates, start, x); }, t, 2e-3);
            CHECK(found.rows[6][k] == Approx(expected).margin(2e-9).epsilon(0));
          }
        }
}

TEST_CASE("derivatives of a detuning scan are those of its populations") {
  const std::vector<double> axis = {-3.0, -1.5, 0.0, 0.2, 0.7, 1.0, 2.5};
  for (const Rates& rates : kKinds) {
    const Start start{Prepared::ground, 0.02, LostReads::bright};
    const double length_s = 2.3;
    std::vector<double> rows[7];
    const auto out = tests::spans(rows, axis.size());
    Status status{};
    Workspace workspace;
    detuning_scan(std::span(&rates, 1), start, axis, std::span(&length_s, 1), out, std::span(&status, 1), workspace);
    REQUIRE(status == Status::ok);
    for (std::size_t k = 0; k < axis.size(); ++k) {
      const auto value = [&](Rates r, double t) {
        r.detuning = axis[k] - r.detuning;
        return population(r, start, t);
      };
      INFO("rabi " << rates.rabi << " offset " << rates.detuning << " at " << axis[k]);
      CHECK(rows[0][k] == Approx(value(rates, length_s)).margin(1e-12).epsilon(0));
      for (int rate = 0; rate < kRateCount; ++rate)
        CHECK(rows[1 + rate][k] ==
              Approx(slope(rates, rate, [&](const Rates& r) { return value(r, length_s); })).margin(2e-8).epsilon(0));
      CHECK(rows[6][k] == Approx(difference([&](double t) { return value(rates, t); }, length_s, 2e-3)).margin(2e-9).epsilon(0));
    }
  }
}
