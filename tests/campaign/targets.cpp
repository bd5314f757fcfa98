// SPDX-License-Identifier: Apache-2.0
#include "tests/campaign/targets.hpp"

#include <cmath>
#include <cstdio>
#include <string_view>

#include "tests/campaign/not_yet.hpp"

namespace halfturn::campaign {
namespace {

constexpr double kChance = 1e-6;
constexpr double kRefused = 0.999, kEfficiency = 1.05;

double log_binomial(std::int64_t k, std::int64_t n, double p) {
  const auto a = static_cast<double>(k), b = static_cast<double>(n);
  return std::lgamma(b + 1) - std::lgamma(a + 1) - std::lgamma(b - a + 1) + a * std::log(p) + (b - a) * std::log1p(-p);
}

double at_most(std::int64_t k, std::int64_t n, double p) { return probability_at_least(n - k, n, 1 - p); }

double bound_of(std::string_view family, Figure figure, double wanted) {
  for (const auto& entry : not_yet())
    if (entry.family == family && entry.figure == figure) return entry.reached;
  return wanted;
}

std::string told(const Row& row, const char* what, double found, double bound) {
  char text[160];
  std::snprintf(text, sizeof text, "%s: %s is %.4g, not within chance of %.4g", row.family.c_str(), what, found, bound);
  return text;
}

/// The figures of one row, each against its bound.
class Check {
 public:
  Check(const Row& row, std::vector<std::string>& failed) : row_(row), failed_(failed) {}

  void no_more(const char* what, Figure figure, std::int64_t k, std::int64_t n, double wanted) const {
    const double bound = bound_of(row_.family, figure, wanted);
    if (n > 0 && probability_at_least(k, n, bound) < kChance) failed_.push_back(told(row_, what, static_cast<double>(k) / static_cast<double>(n), bound));
  }
  void no_less(const char* what, Figure figure, std::int64_t k, std::int64_t n, double wanted) const {
    const double bound = bound_of(row_.family, figure, wanted);
    if (n > 0 && at_most(k, n, bound) < kChance) failed_.push_back(told(row_, what, static_cast<double>(k) / static_cast<double>(n), bound));
  }
  /// The mean square of n normal errors strays from 1 by 4.75 sqrt(2/n) once in a million.
  void efficient(const char* what, Figure figure, double rms, std::int64_t n) const {
    const double bound = bound_of(row_.family, figure, kEfficiency);
    if (n > 0 && rms * rms > bound * bound * (1 + 4.75 * std::sqrt(2.0 / static_cast<double>(n)))) failed_.push_back(told(row_, what, rms, bound));
  }

 private:
  const Row& row_;
  std::vector<std::string>& failed_;
};

void check_row(const Row& row, const Family& family, std::vector<std::string>& failed) {
  const Check check(row, failed);
  check.no_more("the share of wrong scans", Figure::wrong, row.wrong, row.scans, kWrong);
  if (family.kind == Kind::barren) {
    check.no_less("the share refused with the right reason", Figure::refused, row.rightly_refused, row.scans, kRefused);
    return;
  }
  // Where fewer are used, those count whose data can decide.
  if (row.examined == 0) check.no_less("the share of healthy scans used", Figure::used, row.healthy_used, row.healthy, kUsed);
  else check.no_less("the share of decidable healthy scans used", Figure::used, row.decidable_used, row.decidable, kUsed);
  if (family.kind == Kind::misfit) {
    check.no_less("the coverage of 95 % intervals of used scans", Figure::low_95, row.used_in_95, row.used_converged, kMisfitCoverage);
    return;
  }
  const auto band = bands(family.kind);
  check.no_less("the coverage of 68 % intervals", Figure::low_68, row.in_68, row.converged, band.low_68);
  check.no_more("the coverage of 68 % intervals", Figure::high_68, row.in_68, row.converged, band.high_68);
  check.no_less("the coverage of 95 % intervals", Figure::low_95, row.in_95, row.converged, band.low_95);
  check.no_more("the coverage of 95 % intervals", Figure::high_95, row.in_95, row.converged, band.high_95);
  if (family.clean) check.efficient("the error over its bound", Figure::efficiency, row.rms_over_bound, row.measured);
  if (family.kind == Kind::single)
    check.efficient("the error of rabi_hz over its bound", Figure::rabi_efficiency, row.rabi_rms_over_bound, row.rabi_measured);
}

}  // namespace

Bands bands(Kind kind) {
  switch (kind) {
    case Kind::single: return {0.66, 0.71, 0.94, 0.965};
    case Kind::competing: return {0.62, 0.75, 0.91, 0.975};
    case Kind::misfit:
    case Kind::barren: break;
  }
  return {0, 1, 0, 1};
}

double probability_at_least(std::int64_t k, std::int64_t n, double p) {
  if (k <= 0) return 1;
  if (p <= 0) return 0;
  if (p >= 1) return 1;
  double sum = 0;
  for (std::int64_t i = k; i <= n; ++i) sum += std::exp(log_binomial(i, n, p));
  return sum;
}

std::vector<std::string> failures(const Result& result) {
  std::vector<std::string> failed;
  std::int64_t wrong = 0, scans = 0;
  for (const auto& row : result.rows) {
    const auto* family = family_named(row.family);
    if (family != nullptr) check_row(row, *family, failed);
    if (bound_of(row.family, Figure::wrong, kWrong) > kWrong) continue;
    wrong += row.wrong;
    scans += row.scans;
  }
  if (probability_at_least(wrong, scans, kWrong) < kChance)
    failed.push_back(std::to_string(wrong) + " of " + std::to_string(scans) + " scans are wrong, more than 3 in a million");
  return failed;
}

}  // namespace halfturn::campaign
