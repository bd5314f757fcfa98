// SPDX-License-Identifier: Apache-2.0
#include "model/infer/profile.hpp"

#include <algorithm>
#include <cmath>
#include <fstream>
#include <random>
#include <sstream>
#include <vector>

#include "model/infer/likelihood.hpp"
#include "model/infer/statistics.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::infer;
using Kind = ProfileEnd::Kind;

namespace {

const double kNinetyFive = 3.841458820694124;

Vector vector(std::initializer_list<double> values) {
  Vector out(static_cast<Eigen::Index>(values.size()));
  std::copy(values.begin(), values.end(), out.data());
  return out;
}

struct Proportion final : Objective {
  double k, n;
  Proportion(double counts, double shots) : k(counts), n(shots) {}
  bool evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const override {
    const PointLikelihood at = binomial(k, n, x[0]);
    value = at.half_deviance;
    if (gradient) *gradient = Vector::Constant(1, at.score);
    if (information) *information = Matrix::Constant(1, 1, at.information);
    return std::isfinite(value);
  }
};

/// Counts that rise as floor + height (1 - exp(-rate t)), parameters (height, rate, floor).
struct Rise final : Objective {
  std::vector<double> t, k, n;
  bool evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const override {
    std::vector<double> mean(t.size()), score(t.size()), weight(t.size());
    for (size_t i = 0; i < t.size(); ++i) mean[i] = x[2] + x[0] * (1 - std::exp(-x[1] * t[i]));
    if (!halfturn::infer::evaluate(Readout{Readout::Kind::binomial, k, n}, mean, value, score, weight)) return false;
    if (!gradient) return true;
    gradient->setZero(3);
    information->setZero(3, 3);
    for (size_t i = 0; i < t.size(); ++i) {
      const double e = std::exp(-x[1] * t[i]);
      const Eigen::Vector3d row(1 - e, x[0] * t[i] * e, 1);
      *gradient += score[i] * row;
      *information += weight[i] * row * row.transpose();
    }
    return true;
  }
};

const Rise kRise = [] {
  Rise out;
  out.t = {0.5, 1, 1.5, 2, 3, 4, 6, 8};
  out.k = {3, 9, 11, 17, 20, 24, 31, 29};
  out.n = std::vector<double>(8, 40.0);
  return out;
}();

}  // namespace

// Newcombe, Stat. Med. 17, 857 (1998), method of likelihood intervals; the file's ten digits by SciPy's brentq.
TEST_CASE("likelihood intervals of a proportion") {
  NEEDS_REFERENCE_DATA(folder);
  std::ifstream file(*folder + "/intervals95.csv");
  int rows = 0, ends = 0, evaluations = 0;
  for (std::string line; std::getline(file, line);) {
    std::replace(line.begin(), line.end(), ',', ' ');
    double k, n, low, high;
    std::string method;
    if (!(std::istringstream(line) >> k >> n >> method >> low >> high) || method != "likelihood") continue;
    const Bounds bounds{Vector::Zero(1), Vector::Ones(1)};
    const Proportion objective(k, n);
    const Minimum minimum = minimise(objective, Vector::Constant(1, (k + 0.5) / (n + 1)), bounds);
    REQUIRE(minimum.outcome == Outcome::converged);
    CHECK(std::abs(minimum.x[0] - k / n) < 1e-6);
    const ProfileInterval found = profile_interval(objective, minimum, 0, kNinetyFive, bounds);
    INFO(k << " of " << n);
    CHECK(std::abs(found.low.at - low) <= 1e-3 * (k / n - low) + 1e-9);
    CHECK(std::abs(found.high.at - high) <= 1e-3 * (high - k / n) + 1e-9);
    CHECK(found.low.kind == (k == 0 ? Kind::bound : Kind::reached));
    CHECK(found.high.kind == (k == n ? Kind::bound : Kind::reached));
    CHECK_FALSE(found.lower_found);
    for (const ProfileEnd& end : {found.low, found.high}) {
      if (end.kind != Kind::reached) continue;
      ++ends, evaluations += end.evaluations;
    }
    ++rows;
  }
  CHECK(rows == 18);
  CHECK(evaluations <= 4 * ends);
}

// scipy.optimize: Nelder-Mead (xatol 1e-12) of the likelihood and of the profile's nuisance parameters from six starts,
// ends by brentq (SciPy 1.10.1). In the second case the floor, at first a nuisance parameter, lies on its bound.
TEST_CASE("profiles of a saturating rise") {
  struct Case {
    double floor_bound, value;
    double at[3], ends[3][2];
  };
  const Case cases[] = {
      {-0.5, 0.8170894524179834, {0.87597911, 0.39271463, -0.0795182},
       {{0.7073438958050824, 1.0521905534081066},
        {0.1802607204666576, 0.6852652436349631},
        {-0.22282647464318844, 0.07503135610715629}}},
      {0.0, 1.3504537405221197, {0.84617283, 0.30300362, 0.0},
       {{0.6833814201673774, 1.1068540521689536}, {0.1539505576019102, 0.47660492362722023}, {0.0, 0.09597320864397421}}}};
  for (const Case& c : cases) {
    const Bounds bounds{vector({0, 0.01, c.floor_bound}), vector({5, 5, 0.5})};
    const Minimum minimum = minimise(kRise, vector({0.6, 0.6, 0.1}), bounds);
    REQUIRE(minimum.outcome == Outcome::converged);
    CHECK(minimum.value == Approx(c.value).epsilon(1e-9));
    CHECK(minimum.at_bound[2] == (c.floor_bound == 0.0 ? -1 : 0));
    for (int i = 0; i < 3; ++i) {
      const ProfileInterval found = profile_interval(kRise, minimum, i, kNinetyFive, bounds);
      INFO("floor >= " << c.floor_bound << ", parameter " << i << ", evaluations " << found.low.evaluations
                        << " and " << found.high.evaluations);
      CHECK(minimum.x[i] == Approx(c.at[i]).margin(2e-6));
      CHECK(std::abs(found.low.at - c.ends[i][0]) <= 1e-3 * (c.at[i] - c.ends[i][0]) + 1e-12);
      CHECK(std::abs(found.high.at - c.ends[i][1]) <= 1e-3 * (c.ends[i][1] - c.at[i]));
      CHECK(found.low.kind == (minimum.at_bound[i] == -1 ? Kind::bound : Kind::reached));
      CHECK(found.high.kind == Kind::reached);
      CHECK(found.low.evaluations <= 15);
      CHECK(found.high.evaluations <= 15);
    }
  }
}

// Newton on the end and bracketing of the profile share only the solver, which the tests above hold to outside values.
TEST_CASE("Newton's ends and bracketed ends agree on random scans") {
  std::mt19937_64 random(77);
  int ends = 0, evaluations = 0, bracketed_evaluations = 0;
  for (int trial = 0; trial < 200; ++trial) {
    Rise scan;
    scan.t = {0.5, 1, 1.5, 2, 3, 4, 6, 8, 12, 16, 20, 25};
    scan.k = scan.n = std::vector<double>(scan.t.size(), 100.0);
    const double floor = trial % 3 == 0 ? 0.01 : 0.15, rate = 0.2 + 0.004 * trial;
    for (size_t i = 0; i < scan.t.size(); ++i) {
      scan.k[i] = std::binomial_distribution<int>(100, floor + 0.7 * (1 - std::exp(-rate * scan.t[i])))(random);
    }
    const Bounds bounds{vector({0, 0.01, 0}), vector({1, 5, 1})};
    const Minimum minimum = minimise(scan, vector({0.7, rate, floor}), bounds);
    REQUIRE(minimum.outcome == Outcome::converged);
    for (int i = 0; i < 3; ++i) {
      ProfileOptions slow;
      slow.newton_steps = 0;
      slow.accuracy = 1e-5;
      const ProfileInterval quick = profile_interval(scan, minimum, i, kNinetyFive, bounds);
      const ProfileInterval sure = profile_interval(scan, minimum, i, kNinetyFive, bounds, slow);
      for (int side = 0; side < 2; ++side) {
        const ProfileEnd& a = side ? quick.high : quick.low;
        const ProfileEnd& b = side ? sure.high : sure.low;
        INFO("trial " << trial << " parameter " << i << " side " << side << " at "
                      << minimum.x[i] << ": " << a.at << " " << b.at);
        CHECK(a.kind == b.kind);
        if (a.kind != b.kind || a.kind != Kind::reached) continue;
        CHECK(std::abs(a.at - b.at) <= 1e-3 * std::abs(b.at - minimum.x[i]));
        ++ends, evaluations += a.evaluations, bracketed_evaluations += b.evaluations;
      }
    }
  }
  CAPTURE(ends, evaluations, bracketed_evaluations);
  CHECK(ends > 800);
  CHECK(evaluations <= 4 * ends);  // 3.7 an end at present; bracketing to 1e-5 takes 12
}

namespace {

/// Half deviance r(x)^2/2 of one coordinate, with a second that follows along a bent valley: the profile is r^2/2 exactly.
struct Valley final : Objective {
  double (*r)(double);
  double (*slope)(double);
  bool evaluate(const Vector& x, double& value, Vector* gradient, Matrix* information) const override {
    const double a = r(x[0]), b = 3.0 * (x[1] - x[0] * x[0]);
    value = 0.5 * (a * a + b * b);
    if (!gradient) return std::isfinite(value);
    const Eigen::RowVector2d first(slope(x[0]), 0.0), second(-6.0 * x[0], 3.0);
    *gradient = (first * a + second * b).transpose();
    *information = first.transpose() * first + second.transpose() * second;
    return std::isfinite(value);
  }
};

}  // namespace

TEST_CASE("ends in closed form: skewed, bent, open and beyond a bound") {
  Valley valley;
  valley.r = [](double x) { return 2.0 * (std::exp(x) - 1.0); };
  valley.slope = [](double x) { return 2.0 * std::exp(x); };
  const double z = std::sqrt(kNinetyFive);
  Minimum minimum = minimise(valley, vector({0.3, 0.3}), Bounds::none(2));
  REQUIRE(minimum.outcome == Outcome::converged);
  ProfileInterval found = profile_interval(valley, minimum, 0, kNinetyFive, Bounds::none(2));
  CHECK(found.high.at == Approx(std::log(1 + z / 2)).epsilon(1e-3));
  CHECK(found.low.at == Approx(std::log(1 - z / 2)).epsilon(1e-3));
  CHECK(found.high.x[1] == Approx(found.high.at * found.high.at).epsilon(1e-2));

  valley.r = [](double x) { return 1.5 * std::tanh(x); };  // never reaches 1.96
  valley.slope = [](double x) { return 1.5 / (std::cosh(x) * std::cosh(x)); };
  minimum = minimise(valley, vector({0.1, 0.1}), Bounds::none(2));
  found = profile_interval(valley, minimum, 0, kNinetyFive, Bounds::none(2));
  CHECK(found.low.kind == Kind::open);
  CHECK(found.high.kind == Kind::open);
  CHECK(std::isnan(found.high.at));
  const Bounds boxed{vector({-0.4, -50}), vector({30, 1000})};
  found = profile_interval(valley, minimum, 0, kNinetyFive, boxed);
  CHECK(found.low.kind == Kind::bound);
  CHECK(found.low.at == -0.4);
  CHECK(found.high.kind == Kind::bound);
  CHECK(found.high.at == 30.0);
}

TEST_CASE("a minimum that is not the lowest is told") {
  Valley valley;
  valley.r = [](double x) { return 2.0 * x; };
  valley.slope = [](double) { return 2.0; };
  const Bounds narrow{vector({0.5, -9}), vector({9, 9})}, wide = Bounds::none(2);
  const Minimum held = minimise(valley, vector({1, 1}), narrow), best = minimise(valley, vector({1, 1}), wide);
  REQUIRE(held.at_bound[0] == -1);
  CHECK_FALSE(profile_interval(valley, held, 0, kNinetyFive, narrow).lower_found);
  CHECK(profile_interval(valley, held, 0, kNinetyFive, wide).lower_found);
  CHECK(profile_interval(valley, held, 1, kNinetyFive, wide).lower_found);
  CHECK_FALSE(profile_interval(valley, best, 0, kNinetyFive, wide).lower_found);
}

TEST_CASE("nonsense gives no interval") {
  const Proportion objective(3, 10);
  const Bounds bounds{Vector::Zero(1), Vector::Ones(1)};
  const Minimum minimum = minimise(objective, Vector::Constant(1, 0.3), bounds);
  CHECK(profile_interval(objective, minimum, 1, kNinetyFive, bounds).low.kind == Kind::failed);
  CHECK(profile_interval(objective, minimum, 0, 0.0, bounds).high.kind == Kind::failed);
  CHECK(profile_interval(objective, Minimum{}, 0, kNinetyFive, bounds).high.kind == Kind::failed);
}
