// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>
#include <vector>

#include "model/infer/outliers.hpp"
#include "model/infer/starts.hpp"
#include "model/quantity/constants.hpp"

/// What a scan's axis and readings are before any model is tried.
namespace halfturn::infer {

using constants::kPi;

// Points this part of a step off an even grid leave its aliases within a few units of deviance of the truth.
constexpr double kOffGrid = 0.05;

void linear_points(const Readout& readout, std::span<double> value, std::span<double> weight) {
  if (readout.robust()) return level_points(readout, value, weight);
  for (std::size_t i = 0; i < value.size(); ++i) {
    const double k = readout.observed[i], n = readout.weight[i];
    value[i] = weight[i] = 0.0;
    if (!std::isfinite(k) || !std::isfinite(n) || !(n > 0.0)) continue;
    if (readout.kind == Readout::Kind::gaussian) {
      value[i] = k;
      weight[i] = 1.0 / (n * n);
    } else if (readout.kind == Readout::Kind::poisson) {
      value[i] = k / n;
      weight[i] = n * n / (k + 1.0);
    } else {
      const double p = (k + 2.0) / (n + 4.0);
      value[i] = k / n;
      weight[i] = n / (p * (1.0 - p));
    }
  }
}

bool take_points(const Readout& readout, const Sampling& sampling, SearchWorkspace& work) {
  const auto n = readout.observed.size();
  if (sampling.distinct < 4) return false;
  work.reserve(n);
  linear_points(readout, {work.value.data(), n}, {work.weight.data(), n});
  return std::any_of(work.weight.begin(), work.weight.begin() + static_cast<std::ptrdiff_t>(n), [](double w) { return w > 0.0; });
}

void SearchWorkspace::reserve(std::size_t points) {
  for (auto* array : {&value, &weight, &part, &weighted})
    if (array->size() < points) array->resize(points);
  if (place.size() < points) place.resize(points);
}

void keep_signals_possible(Readout::Kind kind, Physical& start) {
  if (kind == Readout::Kind::binomial) {
    const double contrast = start.contrast();
    start.signal_ground = std::clamp(start.signal_ground, 0.005, 0.995);
    start.signal_excited = std::clamp(start.signal_excited, 0.005, 0.995);
    // Both at one end: a contrast must be left, or the fit has nothing to hold on to.
    if (start.signal_ground == start.signal_excited) start.signal_excited = start.signal_ground < 0.5 ? 0.5 : 0.5 * start.signal_ground;
    if (contrast * start.contrast() < 0.0) std::swap(start.signal_ground, start.signal_excited);
  } else if (kind == Readout::Kind::poisson) {
    const double least = 1e-3 * std::max(std::abs(start.signal_ground), std::abs(start.signal_excited));
    start.signal_ground = std::max(start.signal_ground, least);
    start.signal_excited = std::max(start.signal_excited, least);
  }
}

bool sign_admitted(const Prior& prior, double contrast) {
  constexpr double kReach = 6.0;
  if (!prior.contrast) return true;
  return contrast * prior.contrast->mean >= 0.0 || std::abs(prior.contrast->mean) <= kReach * prior.contrast->sigma;
}

double kept_above(double best_gain) { return best_gain - std::max(60.0, 0.3 * best_gain); }

Sampling sampling_of(Axis kind, std::span<const double> axis) {
  Sampling sampling;
  if (axis.empty()) return sampling;
  std::vector<double> sorted(axis.begin(), axis.end());
  std::sort(sorted.begin(), sorted.end());
  sampling.span = sorted.back() - sorted.front();
  // Values closer than 1e-9 of the span are one.
  const double same = 1e-9 * sampling.span;
  sampling.distinct = 1;
  sampling.spacing = sampling.span;
  for (std::size_t i = 1; i < sorted.size(); ++i) {
    const double gap = sorted[i] - sorted[i - 1];
    if (gap <= same) continue;
    ++sampling.distinct;
    sampling.spacing = std::min(sampling.spacing, gap);
  }
  if (sampling.distinct < 2) return sampling;
  sampling.even = true;
  // The step is refined along the way, so that a grid whose points are off by a few hundredths of it still counts as even:
  // its aliases fit nearly as well.
  double step = sampling.spacing;
  for (std::size_t i = 1; i < sorted.size(); ++i) {
    const double from_first = sorted[i] - sorted.front(), steps = std::round(from_first / step);
    if (std::abs(from_first / step - steps) > kOffGrid) sampling.even = false;
    if (steps > 0.0 && sampling.even) step = from_first / steps;
  }
  if (sampling.even) sampling.spacing = step;
  if (kind == Axis::detuning) return sampling;
  const double of_gap = kPi / sampling.spacing;
  const double of_count = kPi * static_cast<double>(sampling.distinct - 1) / sampling.span;
  sampling.limit = sampling.even ? of_gap : std::min(of_gap, 8.0 * of_count);
  return sampling;
}

std::span<const double> progress_of(const ScanBatch& scan, std::vector<double>& progress) {
  const auto n = scan.points();
  if (scan.kind != Axis::duration || n == 0) return {};
  progress.resize(n);
  const bool timed = scan.at_s.size() == n;
  for (std::size_t i = 0; i < n; ++i) progress[i] = timed ? scan.at_s[i] : static_cast<double>(i);
  const auto [first, last] = std::minmax_element(progress.begin(), progress.end());
  const double from = *first, whole = *last - from;
  if (!(whole > 0.0)) return {};
  for (double& part : progress) part = (part - from) / whole - 0.5;
  return progress;
}

}  // namespace halfturn::infer
