// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <limits>
#include <random>

#include "tests/model/dynamics/reference_table.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::dynamics;

namespace {

constexpr double kNaN = std::numeric_limits<double>::quiet_NaN();
constexpr double kInfinity = std::numeric_limits<double>::infinity();

std::vector<double> even_grid(double first, double step, int points) {
  std::vector<double> result;
  for (int k = 0; k < points; ++k) result.push_back(first + k * step);
  return result;
}

double worst_difference(const std::vector<double>& a, const std::vector<double>& b) {
  double worst = 0;
  for (std::size_t k = 0; k < a.size(); ++k) worst = std::max(worst, std::abs(a[k] - b[k]));
  return worst;
}

}  // namespace

// The same lengths in another order are no even grid, so each point has its own exponentials.
TEST_CASE("the recurrence of an even grid adds less than 1e-12") {
  for (const Rates& rates : std::vector<Rates>{{2.6, 0, 0, 0, 0}, {1, 0.4, 0, 0, 0}, {1, 0.4, 0.01, 0.003, 0.02}, {0.1, 0, 1, 0.01, 0}})
    for (int points : {2, 3, 7, 8, 9, 60, 513, 3000}) {
      const auto even = even_grid(0.25, 0.125, points);
      auto shuffled = even;
      std::swap(shuffled.front(), shuffled.back());
      auto direct = tests::evaluate(rates, {}, shuffled);
      const auto recurrent = tests::evaluate(rates, {}, even);
      for (int row = 0; row < 7; ++row) {
        std::swap(direct.rows[row].front(), direct.rows[row].back());
        const double scale = row == 0 || row == 6 ? 1 : even.back();
        INFO("row " << row << ", " << points << " points");
        CHECK(worst_difference(direct.rows[row], recurrent.rows[row]) < 1e-12 * scale);
      }
    }
}

TEST_CASE("a dead time shortens every pulse, and a pulse of negative length is none") {
  const std::vector<Rates> batch = {{2, 0.3, 0.1, 0.1, 0}, {2, 0.3, 0, 0, 0}, {0.5, 0, 0, 1.0, 0}};
  const std::vector<double> dead = {0.55, -0.2, 100.0};
  const Start start{Prepared::excited, 0.1, LostReads::bright};
  const std::vector<std::vector<double>> grids = {even_grid(0, 0.2, 20), {0.1, 3.0, 0.7, 0.55, 2.0, 0.0}};
  for (const auto& length_s : grids) {
    const std::size_t points = length_s.size();
    std::vector<double> rows[7];
    const auto out = tests::spans(rows, batch.size() * points);
    std::vector<Status> status(batch.size());
    Workspace workspace;
    duration_scan(batch, start, length_s, dead, out, status, workspace);
    for (std::size_t set = 0; set < batch.size(); ++set)
      for (std::size_t k = 0; k < points; ++k) {
        const double effective = length_s[k] - dead[set];
        const std::size_t at = set * points + k;
        CHECK(rows[0][at] == Approx(population(batch[set], start, effective)).margin(1e-13).epsilon(0));
        if (effective >= 0) continue;
        CHECK(rows[0][at] == Approx(0.9).margin(1e-14));
        for (int row = 1; row < 7; ++row) CHECK(rows[row][at] == Approx(0).margin(1e-14));
      }
  }
}

TEST_CASE("only what is asked for is computed, and it does not depend on what else is") {
  const Rates rates{2, 0.3, 0.1, 0.2, 0.05};
  const auto length_s = even_grid(0, 0.1, 60);
  const auto all = tests::evaluate(rates, {}, length_s);
  for (int row = 0; row < 7; ++row) {
    std::vector<double> values(length_s.size());
    Derivatives out;
    (row == 0 ? out.population : row == 6 ? out.by_length : out.by_rate[row - 1]) = values;
    Status status{};
    Workspace workspace;
    duration_scan(std::span(&rates, 1), {}, length_s, {}, out, std::span(&status, 1), workspace);
    CHECK(status == Status::ok);
    CHECK(values == all.rows[row]);
  }
}

TEST_CASE("what cannot be computed is NaN and says so, beside what can") {
  const std::vector<Rates> batch = {{1, 0, 0, 0, 0},     {kNaN, 0, 0, 0, 0},   {1, kInfinity, 0, 0, 0}, {1, 0, -0.1, 0, 0},
                                    {1, 0, 0, -0.1, 0},  {1, 0, 0, 0, -0.1},   {1, 0.5, 0.1, 0.1, 0.1}, {1e200, 1e200, 1, 1, 1}};
  const auto length_s = even_grid(0, 1, 5);
  std::vector<double> rows[7];
  const auto out = tests::spans(rows, batch.size() * 5);
  std::vector<Status> status(batch.size());
  Workspace workspace;
  duration_scan(batch, {}, length_s, {}, out, status, workspace);
  for (std::size_t set = 0; set < batch.size(); ++set) {
    const bool good = set == 0 || set == 6;
    INFO("set " << set);
    CHECK(status[set] == (good ? Status::ok : Status::not_finite));
    if (set >= 1 && set <= 5) CHECK(std::isnan(rows[0][5 * set]));
  }
  const std::vector<double> bad = {0.0, kNaN, 2.0};
  CHECK(tests::evaluate(batch[6], {}, bad).status == Status::not_finite);
  CHECK(std::isnan(population({1, 0, -1, 0, 0}, {}, 1.0)));
  CHECK(std::isnan(population({1, 0, 1, 0, 0}, {}, kNaN)));
  CHECK(std::isnan(population({1, 0, 1, 0, 0}, {Prepared::ground, kNaN}, 1.0)));
}

// Each point of a line is a duration scan of one point; the line is longer than the blocks it is computed in.
TEST_CASE("a detuning scan agrees with duration scans at each detuning") {
  const std::vector<double> axis = even_grid(-12.9, 0.2, 130), pulse = {3.0, 1.3, 0.0, 2.0, -1.0, 2.0, 2.0};
  const std::vector<Rates> batch = {{1, 0.3, 0, 0, 0}, {1, -0.3, 0.2, 0.1, 0.3}, {1, 0.1, 0.2, 0, 0}, {0.1, 0.1, 0.5, 0.01, 0},
                                    {1, 0.1, 0.2, 0, 0}, {1, 0.1, 1e-9, 0, 0},   {0.8, 0, 0, 1, 0}};
  const Start start{Prepared::excited, 0.1, LostReads::bright};
  std::vector<double> rows[7];
  const auto out = tests::spans(rows, batch.size() * axis.size());
  std::vector<Status> status(batch.size());
  Workspace workspace;
  detuning_scan(batch, start, axis, pulse, out, status, workspace);
  for (std::size_t set = 0; set < batch.size(); ++set) {
    CHECK(status[set] == Status::ok);
    for (std::size_t k = 0; k < axis.size(); ++k) {
      Rates rates = batch[set];
      rates.detuning = axis[k] - rates.detuning;
      auto one = tests::evaluate(rates, start, {pulse[set]});
      one.rows[1 + kByDetuning][0] *= -1;
      for (int row = 0; row < 7; ++row) {
        INFO("set " << set << " row " << row << " at " << axis[k]);
        CHECK(rows[row][set * axis.size() + k] == Approx(one.rows[row][0]).margin(1e-10).epsilon(0));
      }
    }
  }
}

TEST_CASE("an empty scan and an empty batch are no fault") {
  CHECK(tests::evaluate({1, 0, 0, 0, 0}, {}, {}).status == Status::ok);
  Workspace workspace;
  duration_scan({}, {}, even_grid(0, 1, 3), {}, {}, {}, workspace);
}
