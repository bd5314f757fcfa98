// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <limits>
#include <numbers>

#include "model/dynamics/ensemble.hpp"
#include "model/dynamics/motion.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::dynamics;
using Kind = Ensemble::Kind;

namespace {

constexpr double kPi = std::numbers::pi;

/// Mean of cos(x phase - angle) over a cloud, by Simpson's rule in y, x = exp(-y/kappa).
double cloud_mean(double kappa, double phase, double angle) {
  constexpr int kSteps = 20000;
  const double h = 40.0 / kSteps;
  double sum = 0;
  for (int i = 0; i <= kSteps; ++i) {
    const double y = i * h, weight = i == 0 || i == kSteps ? 1 : i % 2 == 1 ? 4 : 2;
    sum += weight * std::exp(-y) * std::cos(phase * std::exp(-y / kappa) - angle);
  }
  return sum * h / 3;
}

double thermal_mean(double eta, double mean, double phase, double angle) {
  double sum = 0, weight = 1 / (1 + mean);
  for (unsigned n = 0; n < 30 * (mean + 1); ++n, weight *= mean / (1 + mean))
    sum += weight * std::cos(phase * std::exp(-0.5 * eta * eta) * std::laguerre(n, eta * eta) - angle);
  return sum;
}

/// The maximum within [low, high] by a grid and then golden sections.
template <class Function>
double largest(const Function& f, double low, double high) {
  double best = low;
  for (int i = 0; i <= 60; ++i) {
    const double x = low + (high - low) * i / 60;
    if (f(x) > f(best)) best = x;
  }
  const double golden = 0.5 * (std::sqrt(5.0) - 1), width = (high - low) / 60;
  double a = best - width, b = best + width;
  while (b - a > 1e-8) {
    const double c = b - golden * (b - a), d = a + golden * (b - a);
    (f(c) > f(d) ? b : a) = f(c) > f(d) ? d : c;
  }
  return 0.5 * (a + b);
}

void check_slope(const Ensemble& ensemble, double angle, EnsembleWorkspace& workspace) {
  const double h = 1e-3 * ensemble.parameter;
  Ensemble more = ensemble, less = ensemble;
  more.parameter += h;
  less.parameter -= h;
  const double expected =
      (best_pulse_phase(more, angle, workspace).value - best_pulse_phase(less, angle, workspace).value) / (2 * h);
  CHECK(best_pulse_phase(ensemble, angle, workspace).by_parameter == Approx(expected).epsilon(1e-5));
}

}  // namespace

// The factor 1.15 for sigma = 0.3 w is common ground of the design; the maxima are found by a grid and golden sections, which
// leave 1e-7 where a maximum is flat.
TEST_CASE("the best pulse in a cloud maximises the mean of cos(x phase - angle)") {
  EnsembleWorkspace workspace;
  CHECK(best_pulse_phase({Kind::cloud, 0.3, false, {}}, kPi, workspace).value / kPi == Approx(1.15).margin(0.005));
  for (double ratio : {0.05, 0.3, 0.5})
    for (double angle : {0.5 * kPi, kPi})
      for (bool intensity : {false, true}) {
        const Ensemble ensemble{Kind::cloud, ratio, intensity, {}};
        const double kappa = (intensity ? 0.25 : 0.5) / (ratio * ratio);
        const double expected = largest([&](double x) { return cloud_mean(kappa, x, angle); }, angle, 2.5 * angle);
        INFO("sigma/w " << ratio << " angle " << angle << " intensity " << intensity);
        CHECK(best_pulse_phase(ensemble, angle, workspace).value == Approx(expected).epsilon(2e-7));
        check_slope(ensemble, angle, workspace);
      }
}

TEST_CASE("the best pulse on a thermal carrier maximises the mean of cos(x phase - angle)") {
  EnsembleWorkspace workspace;
  for (double eta : {0.05, 0.2})
    for (double mean : {0.1, 5.0, 12.0})
      for (double angle : {0.5 * kPi, kPi}) {
        const Mode mode{eta, 0, 1};
        const Ensemble ensemble{Kind::thermal, mean, false, {&mode, 1}};
        const double expected = largest([&](double x) { return thermal_mean(eta, mean, x, angle); }, angle, 2.2 * angle);
        INFO("eta " << eta << " mean " << mean << " angle " << angle);
        CHECK(best_pulse_phase(ensemble, angle, workspace).value == Approx(expected).epsilon(2e-7));
        check_slope(ensemble, angle, workspace);
      }
}

// exp(-(s phase)^2/2) cos(phase - angle) has its maximum where tan(phase - angle) = -s^2 phase.
TEST_CASE("the best pulse with a spread of coupling is a little short") {
  EnsembleWorkspace workspace;
  for (double s : {0.01, 0.1, 0.5})
    for (double angle : {0.5 * kPi, kPi, 5 * kPi}) {
      const Ensemble ensemble{Kind::spread, s, false, {}};
      const double phase = best_pulse_phase(ensemble, angle, workspace).value;
      CHECK(std::tan(phase - angle) == Approx(-s * s * phase).epsilon(1e-9));
      CHECK(phase < angle);
      CHECK(phase > angle - 0.5 * kPi);
      check_slope(ensemble, angle, workspace);
    }
}

// Of nbar -> 0 only the lowest level is left: n = 0 on the blue sideband; n = 1 on the red one, with the same coupling.
TEST_CASE("best pulses on sidebands begin at the lowest level that couples") {
  EnsembleWorkspace workspace;
  const double lowest = 0.1 * std::exp(-0.005);
  for (int sideband : {-1, 1}) {
    const Mode mode{0.1, sideband, 1};
    CHECK(best_pulse_phase({Kind::thermal, 1e-9, false, {&mode, 1}}, kPi, workspace).value == Approx(kPi / lowest).epsilon(1e-7));
    const Ensemble warm{Kind::thermal, 0.05, false, {&mode, 1}};
    CHECK(best_pulse_phase(warm, kPi, workspace).value < kPi / lowest);
    check_slope(warm, kPi, workspace);
  }
  const Mode red{0.1, -1, 1};
  CHECK(std::isnan(best_pulse_phase({Kind::thermal, 0.0, false, {&red, 1}}, kPi, workspace).by_parameter));
  const Mode still{0.0, 1, 1};
  CHECK(std::isnan(best_pulse_phase({Kind::thermal, 1.0, false, {&still, 1}}, kPi, workspace).value));
}

// At nbar = 50 and eta = 0.2 the mean of cos(x phase - pi), computed by its plain sum, rises all the way from 0 to 3 pi.
TEST_CASE("a best pulse that has ceased to be is not replaced by another") {
  EnsembleWorkspace workspace;
  const Mode mode{0.2, 0, 1};
  CHECK(std::isnan(best_pulse_phase({Kind::thermal, 50.0, false, {&mode, 1}}, kPi, workspace).value));
  double before = -1;
  for (int i = 1; i <= 60; ++i) {
    const double now = thermal_mean(0.2, 50.0, 0.05 * kPi * i, kPi);
    CHECK(now > before);
    before = now;
  }
}

TEST_CASE("best pulses of no ensemble, of no width and of no angle") {
  EnsembleWorkspace workspace;
  const Mode mode{0.2, 0, 1};
  const std::span<const Mode> modes(&mode, 1);
  for (Kind kind : {Kind::none, Kind::doppler, Kind::spread, Kind::cloud, Kind::thermal}) {
    const double lowest = kind == Kind::thermal ? std::exp(-0.02) : 1;
    CHECK(best_pulse_phase({kind, 0, false, modes}, kPi, workspace).value == Approx(kPi / lowest).epsilon(1e-12));
    CHECK(best_pulse_phase({kind, 0.1, false, modes}, 0, workspace).value == 0);
    for (double angle : {-1.0, std::numeric_limits<double>::quiet_NaN(), std::numeric_limits<double>::infinity()})
      CHECK(std::isnan(best_pulse_phase({kind, 0.1, false, modes}, angle, workspace).value));
  }
  CHECK(best_pulse_phase({Kind::doppler, 0.1, false, {}}, kPi, workspace).by_parameter == 0);
}

// kappa/(kappa + 1) by integrating kappa x^kappa; the thermal mean on a carrier of positive couplings is
// exp(-eta^2 (nbar + 1/2)), the generating function of the Laguerre polynomials (Abramowitz and Stegun (1964), 22.9.15).
TEST_CASE("mean couplings have their closed forms") {
  EnsembleWorkspace workspace;
  const auto cloud = mean_coupling({Kind::cloud, 0.3, false, {}}, workspace);
  const double kappa = 0.5 / 0.09;
  CHECK(cloud.value == Approx(kappa / (kappa + 1)).epsilon(1e-12));
  CHECK(cloud.by_parameter == Approx(-0.3 * 4 / std::pow(1 + 1 / kappa, 2)).epsilon(1e-12));
  const Mode modes[] = {{0.05, 0, 1}, {0.03, 0, 2}};
  const auto thermal = mean_coupling({Kind::thermal, 1.5, false, modes}, workspace);
  const double expected = std::exp(-0.0025 * 2.0 - 0.0009 * 3.5);
  CHECK(thermal.value == Approx(expected).epsilon(1e-11));
  CHECK(thermal.by_parameter == Approx(-(0.0025 + 2 * 0.0009) * expected).epsilon(1e-9));
  CHECK(mean_coupling({Kind::spread, 0.1, false, {}}, workspace).value == 1);
}

// Computed with SciPy and checked against expm in 120 Fock levels (worked.json, "Laguerre Omega_nm/Omega").
TEST_CASE("couplings of motional levels have the published check values") {
  struct Row {
    double eta;
    int n, order;
    double value;
  };
  for (const Row& row : std::vector<Row>{{0.05, 0, 0, 0.9987507809245809}, {0.05, 10, 0, 0.9739221489615802},
                                         {0.05, 5, 1, 0.12155825374913197}, {0.05, 0, 2, 0.0017655586247678282},
                                         {0.1, 0, 0, 0.9950124791926823}, {0.1, 1, 0, 0.9850623544007555},
                                         {0.1, 10, 0, 0.897730195956943}, {0.1, 10, 1, 0.3137537521955479},
                                         {0.202, 5, 0, 0.7879512876734227}, {0.202, 1, 1, 0.2741913696900256},
                                         {0.202, 10, 1, 0.5304808866528058}, {0.202, 0, 2, 0.02827009481306882},
                                         {0.3, 10, 0, 0.2564289646195697}, {0.3, 5, 1, 0.553719087189711},
                                         {0.3, 10, 1, 0.5775888756569169}, {0.3, 0, 2, 0.06083930719813034}}) {
    detail::Couplings couplings;
    detail::extend_couplings(row.eta, row.order, 5, couplings);
    detail::extend_couplings(row.eta, row.order, 12, couplings);
    CHECK(couplings.value[static_cast<std::size_t>(row.n)] == Approx(row.value).epsilon(1e-13));
  }
}
