// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <fstream>
#include <limits>
#include <map>
#include <numbers>

#include "tests/model/dynamics/ensemble_support.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::dynamics;
using Kind = Ensemble::Kind;

namespace {

constexpr double kPi = std::numbers::pi, kNaN = std::numeric_limits<double>::quiet_NaN();

std::vector<double> even_grid(double first, double step, int points) {
  std::vector<double> result;
  for (int k = 0; k < points; ++k) result.push_back(first + k * step);
  return result;
}

/// Couplings of a carrier, Laguerre polynomials from the standard library.
std::vector<double> carrier_couplings(double eta, std::size_t levels) {
  std::vector<double> result;
  for (unsigned n = 0; n < levels; ++n) result.push_back(std::exp(-0.5 * eta * eta) * std::laguerre(n, eta * eta));
  return result;
}

/// cos(x theta) averaged over thermal weights by its plain sum.
double thermal_cosine(const std::vector<double>& couplings, double mean, double theta) {
  double sum = 0, weight = 1 / (1 + mean);
  for (double x : couplings) {
    sum += weight * std::cos(theta * x);
    weight *= mean / (1 + mean);
  }
  return sum;
}

/// cos(x theta) averaged over a cloud in a beam, x = exp(-y/kappa), by Simpson's rule over 200000 steps of the root of y.
double cloud_cosine(double kappa, double theta) {
  constexpr int kSteps = 200000;
  const double h = 6.3 / kSteps;
  double sum = 0;
  for (int i = 0; i <= kSteps; ++i) {
    const double root = i * h, y = root * root, weight = i == 0 || i == kSteps ? 1 : i % 2 == 1 ? 4 : 2;
    sum += weight * 2 * root * std::exp(-y) * std::cos(theta * std::exp(-y / kappa));
  }
  return sum * h / 3;
}

/// The generalised Rabi formula (I. I. Rabi, Phys. Rev. 51, 652 (1937)).
double rabi_formula(double rabi, double detuning, double t) {
  const double w = std::hypot(rabi, detuning), s = std::sin(0.5 * w * t);
  return w == 0 ? 0 : rabi * rabi / (w * w) * s * s;
}

}  // namespace

// tests/reference/dynamics_ensembles.py: dense sums over members of SciPy's matrix exponentials.
TEST_CASE("mean populations agree with dense sums over SciPy's matrix exponentials") {
  std::ifstream table(HALFTURN_BINARY_DIR "/reference/dynamics_ensembles.txt");
  std::string name;
  EnsembleWorkspace workspace;
  int scans = 0;
  Ensemble ensemble;
  std::size_t mode_count = 0;
  while (table >> name >> ensemble.parameter >> ensemble.follows_intensity >> mode_count) {
    ensemble.kind = tests::kind_named(name);
    std::vector<Mode> modes(mode_count);
    for (Mode& mode : modes) table >> mode.lamb_dicke >> mode.sideband >> mode.phonon_ratio;
    ensemble.modes = modes;
    Rates rates;
    Start start;
    bool excited = false, bright = false, line = false;
    double other = 0;
    std::size_t points = 0;
    table >> rates.rabi >> rates.detuning >> rates.decay >> rates.loss >> rates.dephasing >> excited >> start.impurity >> bright >>
        line >> other >> points;
    start.prepared = excited ? Prepared::excited : Prepared::ground;
    start.lost_reads = bright ? LostReads::bright : LostReads::dark;
    std::vector<double> axis(points), expected(points);
    for (std::size_t k = 0; k < points; ++k) table >> axis[k] >> expected[k];
    for (bool damping : {false, true}) {  // with derivatives by a damping, closed forms do not serve
      const auto found = tests::mean_scan(rates, ensemble, start, axis, other, line, damping, workspace);
      INFO(name << " " << ensemble.parameter << (line ? " line" : " flop") << " rabi " << rates.rabi << " detuning "
                << rates.detuning << " decay " << rates.decay << " start " << excited << " " << start.impurity);
      REQUIRE(found.status == Status::ok);
      for (std::size_t k = 0; k < points; ++k) {
        INFO("at " << axis[k]);
        CHECK(found.rows[0][k] == Approx(expected[k]).margin(1e-9).epsilon(0));
      }
    }
    ++scans;
  }
  CHECK(scans == 108);
}

// 40 cycles, even and uneven grids, with and without closed forms.
TEST_CASE("mean flops agree with plain sums over many cycles") {
  EnsembleWorkspace workspace;
  const auto even = even_grid(0, 0.25, 1001);
  auto uneven = even;
  std::swap(uneven[3], uneven[700]);
  const auto compare = [&](const Ensemble& ensemble, const auto& cosine) {
    std::map<double, double> known;
    const auto expected = [&](double phase) {
      const auto [at, fresh] = known.try_emplace(phase, 0.0);
      if (fresh) at->second = 0.5 - 0.5 * cosine(phase);
      return at->second;
    };
    for (const auto& axis : {even, uneven})
      for (bool damping : {false, true}) {
        const auto found = tests::mean_scan({1, 0, 0, 0, 0}, ensemble, {}, axis, 0, false, damping, workspace);
        REQUIRE(found.status == Status::ok);
        for (std::size_t k = 0; k < axis.size(); k += k < 8 ? 1 : 71) {
          INFO("kind " << static_cast<int>(ensemble.kind) << " parameter " << ensemble.parameter << " phase " << axis[k]);
          CHECK(found.rows[0][k] == Approx(expected(axis[k])).margin(2e-10).epsilon(0));
        }
      }
  };
  for (double sigma : {0.0003, 0.002, 0.005, 0.01, 0.03, 0.3})
    compare({Kind::spread, sigma, false, {}}, [&](double t) { return std::exp(-0.5 * sigma * sigma * t * t) * std::cos(t); });
  for (double ratio : {0.001, 0.01, 0.1, 0.3, 0.36, 0.6, 1.0, 1.5, 3.0})
    compare({Kind::cloud, ratio, false, {}}, [&](double t) { return cloud_cosine(0.5 / (ratio * ratio), t); });
  compare({Kind::cloud, 0.3, true, {}}, [](double t) { return cloud_cosine(0.25 / 0.09, t); });
  for (double mean : {0.0, 0.03, 2.0, 50.0})
    for (double eta : {0.0, 0.05, 0.3}) {
      const Mode mode{eta, 0, 1};
      const auto couplings = carrier_couplings(eta, static_cast<std::size_t>(40 * (mean + 1)));
      compare({Kind::thermal, mean, false, {&mode, 1}}, [&](double t) { return thermal_cosine(couplings, mean, t); });
    }
}

TEST_CASE("a Doppler-broadened flop and line agree with plain sums of Rabi's formula") {
  EnsembleWorkspace workspace;
  for (double sigma : {0.01, 0.1, 0.5, 3.0})
    for (double detuning : {0.0, 0.4}) {
      const auto dense = [&](double center, double t) {
        double sum = 0, norm = 0;
        for (int i = -8000; i <= 8000; ++i) {
          const double h = 0.001 * i, weight = std::exp(-0.5 * h * h);
          sum += weight * rabi_formula(1, center + sigma * h, t);
          norm += weight;
        }
        return sum / norm;
      };
      const auto axis = even_grid(0, 1.5, 21);
      const Ensemble ensemble{Kind::doppler, sigma, false, {}};
      const auto flop = tests::mean_scan({1, detuning, 0, 0, 0}, ensemble, {}, axis, 0, false, false, workspace);
      const auto line = tests::mean_scan({1, detuning, 0, 0, 0}, ensemble, {}, axis, 9.0, true, false, workspace);
      for (std::size_t k = 0; k < axis.size(); ++k) {
        INFO("sigma " << sigma << " detuning " << detuning << " at " << axis[k]);
        CHECK(flop.rows[0][k] == Approx(dense(detuning, axis[k])).margin(2e-10).epsilon(0));
        CHECK(line.rows[0][k] == Approx(dense(axis[k] - detuning, 9.0)).margin(2e-10).epsilon(0));
      }
    }
}

// Computed with SciPy from the formulas of Leibfried et al. (2003) (worked.json, "thermal_flop"); the first sets of each eta
// also in the table "Motional" there.
TEST_CASE("thermal flops have the published check values") {
  struct Row {
    double eta, mean, half_turns;
    int sideband;
    double population;
  };
  const std::vector<Row> rows = {
      {0.05, 10, 1, 0, 0.9967540450086811},  {0.05, 10, 2, 0, 0.0127477303589433},  {0.05, 10, 5, 0, 0.929373035250811},
      {0.05, 10, 10, 0, 0.20006151356130641}, {0.1, 5, 1, 0, 0.9866278199734428},   {0.1, 5, 2, 0, 0.0498533540598245},
      {0.1, 5, 5, 0, 0.7912399534169524},    {0.1, 5, 10, 0, 0.3745193574629092},   {0.1, 20, 1, 0, 0.8744444099522963},
      {0.1, 20, 2, 0, 0.3049628173808087},   {0.1, 20, 5, 0, 0.5409843013898175},   {0.1, 20, 10, 0, 0.48935616742024723},
      {0.202, 1.3, 1, 1, 0.18271221357951528}, {0.202, 1.3, 2, 1, 0.5550768533842505}, {0.202, 1.3, 5, 1, 0.663529012587955},
      {0.202, 1.3, 10, 1, 0.36847433354925363}};
  EnsembleWorkspace workspace;
  for (const Row& row : rows) {
    const Mode mode{row.eta, row.sideband, 1};
    const Ensemble ensemble{Kind::thermal, row.mean, false, {&mode, 1}};
    for (bool damping : {false, true}) {
      const auto found = tests::mean_scan({kPi, 0, 0, 0, 0}, ensemble, {}, {row.half_turns}, 0, false, damping, workspace);
      CHECK(found.rows[0][0] == Approx(row.population).margin(1e-10).epsilon(0));
    }
  }
}

// D. Leibfried et al. (2003): red over blue sideband is nbar/(nbar + 1) at every length.
TEST_CASE("the red sideband is nbar/(nbar + 1) of the blue one") {
  EnsembleWorkspace workspace;
  const Mode red{0.1, -1, 1}, blue{0.1, 1, 1};
  for (double mean : {0.1, 1.0, 10.0}) {
    const std::vector<double> axis = even_grid(1, 7.3, 12);
    const auto r = tests::mean_scan({1, 0, 0, 0, 0}, {Kind::thermal, mean, false, {&red, 1}}, {}, axis, 0, false, false, workspace);
    const auto b = tests::mean_scan({1, 0, 0, 0, 0}, {Kind::thermal, mean, false, {&blue, 1}}, {}, axis, 0, false, false, workspace);
    for (std::size_t k = 0; k < axis.size(); ++k)
      CHECK(r.rows[0][k] == Approx(mean / (mean + 1) * b.rows[0][k]).margin(1e-11).epsilon(0));
  }
}

// Few points once left the product of two modes' levels unmerged and then too many: nbar = 8 makes 240 times 240 of them.
TEST_CASE("two warm modes are averaged over few points as over many") {
  EnsembleWorkspace workspace;
  const Mode modes[] = {{0.1, 0, 1}, {0.15, 0, 1}};
  const Ensemble ensemble{Kind::thermal, 8.0, false, modes};
  const auto x = carrier_couplings(0.1, 400), y = carrier_couplings(0.15, 400);
  const auto expected = [&](double t) {
    double sum = 0, weight = 1.0 / 9;
    for (double factor : x) {
      sum += weight * thermal_cosine(y, 8.0, factor * t);
      weight *= 8.0 / 9;
    }
    return 0.5 - 0.5 * sum;
  };
  const std::vector<double> few = {3.0, 20.0};
  const auto many = even_grid(0, 1, 101);
  for (bool damping : {false, true}) {
    const auto short_scan = tests::mean_scan({1, 0, 0, 0, 0}, ensemble, {}, few, 0, false, damping, workspace);
    const auto long_scan = tests::mean_scan({1, 0, 0, 0, 0}, ensemble, {}, many, 0, false, damping, workspace);
    REQUIRE(short_scan.status == Status::ok);
    REQUIRE(long_scan.status == Status::ok);
    for (std::size_t k = 0; k < 2; ++k) CHECK(short_scan.rows[0][k] == Approx(expected(few[k])).margin(2e-10).epsilon(0));
    for (std::size_t k : {3, 20, 100}) CHECK(long_scan.rows[0][k] == Approx(expected(many[k])).margin(2e-10).epsilon(0));
  }
}

TEST_CASE("an ensemble without width is the two-level system") {
  EnsembleWorkspace workspace;
  Workspace plain;
  const Mode modes[] = {{0.0, 0, 1}, {0.0, 0, 1}};
  for (const Rates& rates : std::vector<Rates>{{2, 0, 0, 0, 0}, {2, 0.7, 0, 0, 0}, {2, 0.7, 0.2, 0.3, 0.1}})
    for (Kind kind : {Kind::none, Kind::spread, Kind::doppler, Kind::cloud, Kind::thermal})
      for (bool line : {false, true}) {
        const Start start{Prepared::excited, 0.1, LostReads::bright};
        const auto axis = even_grid(-0.5, 0.5, 30);
        const Ensemble ensemble{kind, 0.0, false, modes};
        const auto found = tests::mean_scan(rates, ensemble, start, axis, 0.3, line, true, workspace);
        std::vector<double> rows[7];
        for (auto& row : rows) row.resize(axis.size());
        Derivatives out{rows[0], {rows[1], rows[2], rows[3], rows[4], rows[5]}, rows[6]};
        Status status{};
        const double other = 0.3;
        (line ? detuning_scan : duration_scan)({&rates, 1}, start, axis, {&other, 1}, out, {&status, 1}, plain);
        for (int row = 0; row < 7; ++row)
          for (std::size_t k = 0; k < axis.size(); ++k) {
            INFO("kind " << static_cast<int>(kind) << " line " << line << " row " << row << " at " << axis[k]);
            CHECK(found.rows[row][k] == Approx(rows[row][k]).margin(1e-12).epsilon(1e-12));
          }
      }
}

TEST_CASE("an ensemble out of range is NaN and says why") {
  EnsembleWorkspace workspace;
  const Mode good{0.1, 0, 1}, bad_eta{-0.1, 0, 1}, bad_order{0.1, 21, 1}, bad_ratio{0.1, 0, kNaN}, hot{0.1, 0, 1e6};
  const auto status_of = [&](const Ensemble& ensemble, double rabi = 1, double dead = 0) {
    const auto found = tests::mean_scan({rabi, 0.1, 0, 0, 0}, ensemble, {}, {1, 2, 3}, dead, false, true, workspace);
    for (const auto& row : found.rows)
      for (double value : row) CHECK(std::isnan(value) == (found.status != Status::ok));
    return found.status;
  };
  CHECK(status_of({Kind::spread, -0.1, false, {}}) == Status::not_finite);
  CHECK(status_of({Kind::cloud, kNaN, false, {}}) == Status::not_finite);
  CHECK(status_of({Kind::thermal, 1, false, {}}) == Status::not_finite);
  for (const Mode* mode : {&bad_eta, &bad_order, &bad_ratio})
    CHECK(status_of({Kind::thermal, 1, false, {mode, 1}}) == Status::not_finite);
  CHECK(status_of({Kind::spread, 0.1, false, {}}, kNaN) == Status::not_finite);
  CHECK(status_of({Kind::spread, 0.1, false, {}}, 1, kNaN) == Status::not_finite);
  CHECK(status_of({Kind::thermal, 1, false, {&hot, 1}}) == Status::too_many_members);
  CHECK(status_of({Kind::spread, 0.1, false, {}}, 1e6) == Status::too_many_members);
  CHECK(status_of({Kind::cloud, 0.1, false, {}}, 1e6) == Status::too_many_members);
  CHECK(status_of({Kind::doppler, 1e4, false, {}}) == Status::too_many_members);
  CHECK(status_of({Kind::thermal, 1, false, {&good, 1}}) == Status::ok);
}
