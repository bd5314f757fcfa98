// SPDX-License-Identifier: Apache-2.0
#include "model/infer/likelihood.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

#include "model/quantity/clones.hpp"
#include "model/quantity/elementary.hpp"

namespace halfturn::infer {
namespace {

constexpr double kInfinity = std::numeric_limits<double>::infinity();

/// k log(k/m) - (k - m), without cancellation near m = k; m where k = 0.
HALFTURN_INLINE double entropy(double k, double m) {
  const bool some = k > 0.0;
  const double inverse = 1.0 / (some ? k : 1.0), safe = m > 1e-300 ? m : 1e-300;
  return some ? k * elementary::excess_over_log(safe * inverse, (safe - k) * inverse) : m;
}

// Choices are written with & and |, which have no short cut to be taken: a loop over them becomes vector instructions.

HALFTURN_INLINE PointLikelihood binomial_point(double counts, double shots, double mean) {
  const double dark = shots - counts, other = 1.0 - mean;
  const bool counted = (shots > 0.0) & (counts == counts);
  const bool possible = (mean >= 0.0) & (mean <= 1.0) & ((counts <= 0.0) | (mean > 0.0)) & ((dark <= 0.0) | (other > 0.0));
  const double deviance = entropy(counts, shots * mean) + entropy(dark, shots * other);
  const double bright = counts > 0.0 ? counts / mean : 0.0, unlit = dark > 0.0 ? dark / other : 0.0;
  const double variance = mean * other;
  // Half a count of the outcome that was never seen, in shots + 1.
  const double least = 0.5 * (shots + 0.5) / ((shots + 1.0) * (shots + 1.0));
  const bool unseen = ((counts <= 0.0) & (mean < 0.5)) | ((dark <= 0.0) & (other < 0.5));
  const double taken = unseen & (variance < least) ? least : variance;
  const double seen = possible ? deviance : kInfinity;
  return {counted ? seen : 0.0, counted & possible ? unlit - bright : 0.0, counted & possible ? shots / taken : 0.0};
}

HALFTURN_INLINE PointLikelihood gaussian_point(double signal, double sigma, double mean) {
  const bool counted = (sigma < kInfinity) & (signal == signal), possible = std::abs(mean) < kInfinity;
  const double z = (mean - signal) / sigma, seen = possible ? 0.5 * z * z : kInfinity;
  return {counted ? seen : 0.0, counted & possible ? z / sigma : 0.0, counted & possible ? 1.0 / (sigma * sigma) : 0.0};
}

HALFTURN_INLINE PointLikelihood poisson_point(double photons, double exposures, double mean) {
  const bool counted = (exposures > 0.0) & (photons == photons), some = photons > 0.0;
  const bool possible = (mean >= 0.0) & (mean < kInfinity) & ((photons <= 0.0) | (mean > 0.0));
  const double deviance = entropy(photons, exposures * mean);
  const double least = 0.5 / exposures;
  const double score = exposures - (some ? photons / mean : 0.0);
  const double information = exposures / (some | (mean > least) ? mean : least);
  const double seen = possible ? deviance : kInfinity;
  return {counted ? seen : 0.0, counted & possible ? score : 0.0, counted & possible ? information : 0.0};
}

/// As many points at a time as stay in the first cache with all that is made of them.
constexpr std::size_t kChunk = 64;

struct Chunk {
  const double *observed, *weight, *mean;
  std::size_t count;
  std::array<double, kChunk> deviance, score, information;
};

template <PointLikelihood (*point)(double, double, double)>
HALFTURN_INLINE void fill_chunk(Chunk& c) {
  for (std::size_t i = 0; i < c.count; ++i) {
    const PointLikelihood at = point(c.observed[i], c.weight[i], c.mean[i]);
    c.deviance[i] = at.half_deviance;
    c.score[i] = at.score;
    c.information[i] = at.information;
  }
}

HALFTURN_CLONES void binomial_chunk(Chunk& c) { fill_chunk<binomial_point>(c); }
HALFTURN_CLONES void gaussian_chunk(Chunk& c) { fill_chunk<gaussian_point>(c); }
HALFTURN_CLONES void poisson_chunk(Chunk& c) { fill_chunk<poisson_point>(c); }

using Fill = void (*)(Chunk&);

Fill fill_of(Readout::Kind kind) {
  if (kind == Readout::Kind::gaussian) return gaussian_chunk;
  return kind == Readout::Kind::poisson ? poisson_chunk : binomial_chunk;
}

bool mean_possible(Readout::Kind kind, double mean) {
  if (kind == Readout::Kind::gaussian) return std::abs(mean) < kInfinity;
  return mean >= 0.0 && (kind == Readout::Kind::binomial ? mean <= 1.0 : mean < kInfinity);
}

PointLikelihood allowed_for(const Readout& readout, std::size_t i, const PointLikelihood& own) {
  const double d = readout.dispersion;
  const PointLikelihood dispersed{own.half_deviance / d, own.score / d, own.information / d};
  if (!readout.odds.empty()) return contaminated(dispersed, readout.odds[i]);
  return readout.softness > 0.0 ? softened(dispersed, readout.softness) : dispersed;
}

/// Allows for scatter and outliers in a chunk of plain points.
void allow(const Readout& readout, std::size_t first, Chunk& c) {
  for (std::size_t i = 0; i < c.count; ++i) {
    if (!mean_possible(readout.kind, c.mean[i])) continue;
    const PointLikelihood at = allowed_for(readout, first + i, {c.deviance[i], c.score[i], c.information[i]});
    c.deviance[i] = at.half_deviance;
    c.score[i] = at.score;
    c.information[i] = at.information;
  }
}

/// Calls `take(chunk, first)` for the points in turn, a chunk at a time.
template <class Take>
void each_chunk(const Readout& readout, std::span<const double> mean, Take take) {
  const Fill fill = fill_of(readout.kind);
  Chunk chunk;
  for (std::size_t first = 0; first < mean.size(); first += kChunk) {
    chunk.observed = readout.observed.data() + first;
    chunk.weight = readout.weight.data() + first;
    chunk.mean = mean.data() + first;
    chunk.count = std::min(kChunk, mean.size() - first);
    fill(chunk);
    if (readout.robust() || readout.dispersion != 1.0) allow(readout, first, chunk);
    take(chunk, first);
  }
}

}  // namespace

PointLikelihood binomial(double counts, double shots, double mean) { return binomial_point(counts, shots, mean); }

PointLikelihood gaussian(double signal, double sigma, double mean) { return gaussian_point(signal, sigma, mean); }

PointLikelihood poisson(double photons, double exposures, double mean) { return poisson_point(photons, exposures, mean); }

PointLikelihood contaminated(const PointLikelihood& plain, double odds) {
  const double d = plain.half_deviance;
  // Left out, or ruled out: beyond exp(700) the plain part is nothing.
  if (plain.information == 0.0 && d == 0.0) return plain;
  if (!(d < 700.0)) return {std::log1p(odds) - std::log(odds), 0.0, 0.0};
  const double growth = odds * std::exp(d), kept = 1.0 / (1.0 + growth);
  const double half = d - std::log1p(growth) + std::log1p(odds);
  const double share = kept * (plain.information - (1.0 - kept) * plain.score * plain.score);
  return {std::max(0.0, half), kept * plain.score, std::max(0.0, share)};
}

PointLikelihood softened(const PointLikelihood& plain, double softness) {
  const double square = softness * softness, root = std::sqrt(1.0 + 2.0 * plain.half_deviance / square);
  return {square * (root - 1.0), plain.score / root, plain.information / root};
}

bool evaluate(const Readout& readout, std::span<const double> mean, double& half_deviance, std::span<double> score,
              std::span<double> information) {
  double total = 0.0;
  each_chunk(readout, mean, [&](const Chunk& chunk, std::size_t first) {
    for (std::size_t i = 0; i < chunk.count; ++i) total += chunk.deviance[i];
    if (!score.empty()) std::copy_n(chunk.score.begin(), chunk.count, score.data() + first);
    if (!information.empty()) std::copy_n(chunk.information.begin(), chunk.count, information.data() + first);
  });
  half_deviance = std::isnan(total) ? kInfinity : total;
  return std::isfinite(total);
}

void half_deviances(const Readout& readout, std::span<const double> mean, std::span<double> out) {
  each_chunk(readout, mean, [&](const Chunk& chunk, std::size_t first) { std::copy_n(chunk.deviance.begin(), chunk.count, out.data() + first); });
}

}  // namespace halfturn::infer
