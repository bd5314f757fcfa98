// SPDX-License-Identifier: Apache-2.0
#include "model/drift/summary.hpp"

#include <algorithm>
#include <cmath>
#include <map>
#include <string>

namespace halfturn::drift {
namespace {

constexpr std::int64_t kDayNs = 86'400'000'000'000;
constexpr double kHourNs = 3.6e12;

std::int64_t day_of(std::int64_t time_ns) { return time_ns / kDayNs - (time_ns % kDayNs < 0 ? 1 : 0); }

/// What is gathered of a day before its medians are taken.
struct Gathered {
  int scans = 0;
  int refused = 0;
  std::vector<double> rabi_hz, sigma_hz, intensity_w_m2;
};

std::map<std::int64_t, Gathered> gather(const Fits& fits) {
  std::map<std::int64_t, Gathered> days;
  for (std::size_t i = 0; i < fits.time_ns.size(); ++i) {
    auto& day = days[day_of(fits.time_ns[i])];
    ++day.scans;
    if (fits.verdict[i] == Verdict::refuse) {
      ++day.refused;
      continue;
    }
    if (std::isfinite(fits.rabi_hz[i])) day.rabi_hz.push_back(fits.rabi_hz[i]);
    if (std::isfinite(fits.rabi_hz[i]) && fits.rabi_sigma_hz[i] > 0.0) day.sigma_hz.push_back(fits.rabi_sigma_hz[i]);
    if (std::isfinite(fits.intensity_w_m2[i])) day.intensity_w_m2.push_back(fits.intensity_w_m2[i]);
  }
  return days;
}

double standard_error(const Gathered& day, double middle) {
  const double count = static_cast<double>(day.rabi_hz.size());
  const double own = median(day.sigma_hz);
  if (day.rabi_hz.size() < 3) return own / std::sqrt(count);
  std::vector<double> deviations;
  for (const double value : day.rabi_hz) deviations.push_back(std::abs(value - middle));
  const double scatter = 1.4826 * median(std::move(deviations));  // a normal distribution's sigma over its median deviation
  const double sigma = std::isfinite(own) ? std::max(own, scatter) : scatter;
  return 1.2533 * sigma / std::sqrt(count);  // sqrt(pi/2): the median of many normal values against their mean
}

std::vector<Day> days_of(const Fits& fits) {
  std::vector<Day> days;
  double first = kNone, previous = kNone;
  for (const auto& [number, gathered] : gather(fits)) {
    Day day;
    day.day = number;
    day.scans = gathered.scans;
    day.refused = gathered.refused;
    day.used = static_cast<int>(gathered.rabi_hz.size());
    day.intensity_w_m2 = median(gathered.intensity_w_m2);
    if (day.used > 0) {
      day.rabi_hz = median(gathered.rabi_hz);
      day.rabi_sigma_hz = standard_error(gathered, day.rabi_hz);
      if (std::isnan(first)) first = day.rabi_hz;
      day.since_first = day.rabi_hz / first - 1.0;
      day.since_previous = day.rabi_hz / previous - 1.0;  // NaN on the first day
      previous = day.rabi_hz;
    }
    days.push_back(day);
  }
  return days;
}

struct Points {
  std::vector<double> hours, value, weight;  // hours since the first
};

Points points_of(const Fits& fits) {
  Points points;
  std::int64_t start = 0;
  for (std::size_t i = 0; i < fits.time_ns.size(); ++i) {
    const double sigma = fits.rabi_sigma_hz[i];
    const bool usable = std::isfinite(fits.rabi_hz[i]) && sigma > 0.0 && std::isfinite(sigma);
    if (fits.verdict[i] == Verdict::refuse || !usable) continue;
    if (points.hours.empty()) start = fits.time_ns[i];
    points.hours.push_back(static_cast<double>(fits.time_ns[i] - start) / kHourNs);
    points.value.push_back(fits.rabi_hz[i]);
    points.weight.push_back(1.0 / (sigma * sigma));
  }
  return points;
}

double weighted_mean(const std::vector<double>& values, const std::vector<double>& weights) {
  double sum = 0.0, total = 0.0;
  for (std::size_t i = 0; i < values.size(); ++i) {
    sum += weights[i] * values[i];
    total += weights[i];
  }
  return sum / total;
}

/// Weighted least squares about the weighted means, which keeps the sums free of cancellation.
Trend trend_of(const Points& points) {
  Trend trend;
  trend.fits = static_cast<int>(points.hours.size());
  if (points.hours.empty()) return trend;
  const double mean_hours = weighted_mean(points.hours, points.weight);
  trend.mean_hz = weighted_mean(points.value, points.weight);
  double xx = 0.0, xy = 0.0;
  for (std::size_t i = 0; i < points.hours.size(); ++i) {
    const double x = points.hours[i] - mean_hours;
    xx += points.weight[i] * x * x;
    xy += points.weight[i] * x * (points.value[i] - trend.mean_hz);
  }
  if (trend.fits < 3 || !(xx > 0.0)) return trend;
  trend.slope_hz_per_hour = xy / xx;
  double chi_square = 0.0;
  for (std::size_t i = 0; i < points.hours.size(); ++i) {
    const double residual = points.value[i] - trend.mean_hz - trend.slope_hz_per_hour * (points.hours[i] - mean_hours);
    chi_square += points.weight[i] * residual * residual;
  }
  trend.scatter = std::sqrt(chi_square / (trend.fits - 2));
  trend.slope_sigma = std::max(1.0, trend.scatter) / std::sqrt(xx);
  const double reach = student_t(0.95, trend.fits - 2) * trend.slope_sigma;
  trend.slope_low = trend.slope_hz_per_hour - reach;
  trend.slope_high = trend.slope_hz_per_hour + reach;
  trend.relative_per_hour = trend.slope_hz_per_hour / trend.mean_hz;
  trend.relative_low = trend.slope_low / trend.mean_hz;
  trend.relative_high = trend.slope_high / trend.mean_hz;
  return trend;
}

}  // namespace

double median(std::vector<double> values) {
  if (values.empty()) return kNone;
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  if (values.size() % 2 == 1) return *middle;
  return 0.5 * (*middle + *std::max_element(values.begin(), middle));
}

Result<Summary> summarise(const Fits& fits) {
  const auto count = fits.time_ns.size();
  if (fits.rabi_hz.size() != count || fits.rabi_sigma_hz.size() != count || fits.verdict.size() != count ||
      fits.intensity_w_m2.size() != count) {
    return fault("bad_shape", "fits", "found arrays of different lengths, expected one value of each for every one of the " +
                 std::to_string(count) + " times");
  }
  return Summary{days_of(fits), trend_of(points_of(fits))};
}

}  // namespace halfturn::drift
