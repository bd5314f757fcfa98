// SPDX-License-Identifier: Apache-2.0
#include "model/infer/conditioning.hpp"

#include <array>
#include <cmath>

#include <Eigen/Eigenvalues>
#include <Eigen/LU>

namespace halfturn::infer {
namespace {

// An eigenvalue of the scaled information below this is rounding: nothing tells that combination.
constexpr double kNothing = 1e-14;

std::string_view damping_name(Dynamics candidate) {
  switch (candidate) {
    case Dynamics::decay:
    case Dynamics::decay_dephasing: return "decay_s";
    case Dynamics::leak:
    case Dynamics::leak_dephasing: return "loss_s";
    default: return "dephasing_s";
  }
}

std::string_view breadth_name(Dynamics candidate) {
  switch (candidate) {
    case Dynamics::spread: return "rabi_spread";
    case Dynamics::doppler: return "detuning_spread_hz";
    case Dynamics::cloud: return "cloud_ratio";
    default: return "mean_phonons";
  }
}

using Names = std::array<std::string_view, kMaxParameters>;

Names names_of(const Layout& layout, Dynamics candidate) {
  Names names;
  const auto put = [&names](int slot, std::string_view name) {
    if (slot >= 0) names[static_cast<std::size_t>(slot)] = name;
  };
  put(layout.lead, layout.compression >= 0 ? "rabi_per_amplitude_hz" : "rabi_hz");
  put(layout.compression, "compression");
  put(layout.line_offset, "line_offset_hz");
  put(layout.detuning_square, "detuning_hz");
  put(layout.dead_time, "dead_time_s");
  put(layout.ground, "floor");
  put(layout.excited, "contrast");
  put(layout.damping, damping_name(candidate));
  put(layout.dephasing, "dephasing_s");
  put(layout.breadth, breadth_name(candidate));
  put(layout.drift, "rabi_drift");
  return names;
}

/// d(solver's vector)/d(estimates) up to positive factors, which drop out when the diagonal is scaled: times fall as rates grow, and
/// the signal of the excited state is floor + contrast.
Matrix by_estimates(const Layout& layout) {
  Matrix slopes = Matrix::Identity(layout.count, layout.count);
  for (const int rate : {layout.damping, layout.dephasing})
    if (rate >= 0) slopes(rate, rate) = -1.0;
  slopes(layout.excited, layout.ground) = 1.0;
  return slopes;
}

/// Information about the estimates that are free, scaled to a unit diagonal.
Matrix scaled_information(const Minimum& minimum, const Layout& layout, const std::vector<int>& free) {
  // A floor that is held while the contrast is free, or the other way about, keeps the value it has in the solver's coordinates.
  const bool signals = minimum.at_bound[static_cast<std::size_t>(layout.ground)] == 0 && minimum.at_bound[static_cast<std::size_t>(layout.excited)] == 0;
  Matrix slopes = by_estimates(layout);
  if (!signals) slopes(layout.excited, layout.ground) = 0.0;
  const Matrix information = slopes.transpose() * minimum.information * slopes;
  const auto size = static_cast<Eigen::Index>(free.size());
  Matrix scaled(size, size);
  for (Eigen::Index a = 0; a < size; ++a)
    for (Eigen::Index b = 0; b < size; ++b) {
      const int i = free[static_cast<std::size_t>(a)], j = free[static_cast<std::size_t>(b)];
      scaled(a, b) = information(i, j) / std::sqrt(information(i, i) * information(j, j));
    }
  return scaled;
}

}  // namespace

Matrix covariance_of(const Minimum& minimum) {
  const auto k = minimum.x.size();
  Matrix information = minimum.information;
  auto held = [&minimum](Eigen::Index i) { return minimum.at_bound[static_cast<std::size_t>(i)] != 0 || !(minimum.information(i, i) > 0.0); };
  for (Eigen::Index i = 0; i < k; ++i) {
    if (!held(i)) continue;
    information.row(i).setZero();
    information.col(i).setZero();
    information(i, i) = 1.0;
  }
  // Scaled to a unit diagonal first: rates and probabilities differ by ten orders of magnitude.
  Vector scale(k);
  for (Eigen::Index i = 0; i < k; ++i) scale[i] = 1.0 / std::sqrt(std::max(information(i, i), 1e-300));
  const Matrix scaled = scale.asDiagonal() * information * scale.asDiagonal();
  const Eigen::FullPivLU<Matrix> factors(scaled);
  Matrix covariance = Matrix::Constant(k, k, std::numeric_limits<double>::quiet_NaN());
  if (factors.isInvertible()) covariance = scale.asDiagonal() * factors.inverse() * scale.asDiagonal();
  for (Eigen::Index i = 0; i < k; ++i)
    if (held(i)) {
      covariance.row(i).setZero();
      covariance.col(i).setZero();
    }
  return covariance;
}

Conditioning conditioning(const ScanObjective& objective, const Minimum& minimum) {
  const Layout& layout = objective.layout();
  const Names names = names_of(layout, objective.candidate());
  Conditioning result;
  std::vector<int> free;
  for (int i = 0; i < layout.count; ++i) {
    const auto slot = static_cast<std::size_t>(i);
    if (minimum.at_bound[slot] != 0) result.at_bound.push_back(names[slot]);
    else free.push_back(i);
  }
  if (free.empty()) return result;
  const Matrix scaled = scaled_information(minimum, layout, free);
  if (!scaled.allFinite()) {
    result.condition = std::numeric_limits<double>::infinity();
    return result;
  }
  const Eigen::SelfAdjointEigenSolver<Matrix> eigen(scaled);
  const auto& values = eigen.eigenvalues();  // ascending
  const double least = values[0], most = values[values.size() - 1];
  result.condition = least > kNothing * most ? most / least : std::numeric_limits<double>::infinity();
  if (free.size() < 2 || !std::isfinite(result.condition)) return result;
  const Matrix covariance = eigen.eigenvectors() * values.cwiseInverse().asDiagonal() * eigen.eigenvectors().transpose();
  double strongest = 0.0;
  for (Eigen::Index a = 0; a < covariance.rows(); ++a)
    for (Eigen::Index b = 0; b < a; ++b) {
      const double correlation = covariance(a, b) / std::sqrt(covariance(a, a) * covariance(b, b));
      if (std::abs(correlation) <= strongest) continue;
      strongest = std::abs(correlation);
      result.correlation = correlation;
      result.one = names[static_cast<std::size_t>(free[static_cast<std::size_t>(b)])];
      result.other = names[static_cast<std::size_t>(free[static_cast<std::size_t>(a)])];
    }
  return result;
}

}  // namespace halfturn::infer
