// SPDX-License-Identifier: Apache-2.0
#include "model/infer/monotone.hpp"

#include <algorithm>
#include <cmath>
#include <numeric>
#include <vector>

namespace halfturn::infer {
namespace {

/// Points that share a mean: sum of readings and sum of weights, in the units where the mean is their ratio.
struct Block {
  double sum;
  double weight;
  std::size_t points;  // how many, in order of the axis
  double mean() const { return sum / weight; }
};

Block block_of(const Readout& readout, std::size_t i) {
  const double observed = readout.observed[i], weight = readout.weight[i];
  if (std::isnan(observed)) return {0.0, 0.0, 1};
  if (readout.kind != Readout::Kind::gaussian) return weight > 0.0 ? Block{observed, weight, 1} : Block{0.0, 0.0, 1};
  const double precision = weight > 0.0 ? 1.0 / (weight * weight) : 0.0;
  return {observed * precision, precision, 1};
}

void absorb(Block& into, const Block& from) {
  into.sum += from.sum;
  into.weight += from.weight;
  into.points += from.points;
}

/// Blocks in order of the axis, one for each distinct position; a position without readings joins its neighbour.
std::vector<Block> positions(const Readout& readout, std::span<const double> axis, const std::vector<std::size_t>& order) {
  std::vector<Block> out;
  for (std::size_t k = 0; k < order.size(); ++k) {
    const Block here = block_of(readout, order[k]);
    const bool tied = k > 0 && axis[order[k]] == axis[order[k - 1]];
    if (!out.empty() && (tied || here.weight <= 0.0 || out.back().weight <= 0.0)) {
      absorb(out.back(), here);
    } else {
      out.push_back(here);
    }
  }
  return out;
}

/// Pools neighbours until the means rise (direction +1) or fall (-1).
std::vector<Block> pooled(const std::vector<Block>& start, double direction) {
  std::vector<Block> out;
  for (const Block& block : start) {
    out.push_back(block);
    while (out.size() > 1 && direction * out[out.size() - 2].mean() >= direction * out.back().mean()) {
      absorb(out[out.size() - 2], out.back());
      out.pop_back();
    }
  }
  return out;
}

std::vector<std::size_t> order_of(std::span<const double> axis) {
  std::vector<std::size_t> order(axis.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) { return axis[a] < axis[b]; });
  return order;
}

Block whole(const std::vector<Block>& blocks) {
  Block all{0.0, 0.0, 0};
  for (const Block& block : blocks) absorb(all, block);
  return all;
}

std::vector<double> means(const std::vector<std::size_t>& order, const std::vector<Block>& blocks) {
  std::vector<double> mean(order.size());
  std::size_t k = 0;
  for (const Block& block : blocks) {
    for (std::size_t i = 0; i < block.points; ++i) mean[order[k++]] = block.mean();
  }
  return mean;
}

double half_deviance(const Readout& readout, const std::vector<std::size_t>& order, const std::vector<Block>& blocks) {
  const auto mean = means(order, blocks);
  double total = 0.0;
  evaluate(readout, mean, total, {}, {});
  return total;
}

}  // namespace

MonotoneFit monotone_half_deviance(const Readout& readout, std::span<const double> axis) {
  const auto order = order_of(axis);
  const std::vector<Block> start = positions(readout, axis, order);
  if (start.empty() || start.front().weight <= 0.0) return {0.0, 0.0, 0.0};
  return {half_deviance(readout, order, pooled(start, 1.0)), half_deviance(readout, order, pooled(start, -1.0)),
          half_deviance(readout, order, {whole(start)})};
}

std::vector<double> monotone_means(const Readout& readout, std::span<const double> axis, int direction) {
  const auto order = order_of(axis);
  const std::vector<Block> start = positions(readout, axis, order);
  if (start.empty() || start.front().weight <= 0.0) return {};
  return means(order, direction == 0 ? std::vector<Block>{whole(start)} : pooled(start, direction));
}

}  // namespace halfturn::infer
