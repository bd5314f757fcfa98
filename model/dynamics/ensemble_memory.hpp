// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <cstddef>
#include <vector>

#include "model/dynamics/two_level.hpp"

namespace halfturn::dynamics {
namespace detail {

/// Members of an ensemble as arrays: coupling Omega scale, detuning Delta + shift, weight, and their derivatives by the
/// ensemble's parameter.
struct Members {
  std::vector<double> scale, shift, weight, by_scale, by_shift, by_weight;
  std::size_t size() const { return scale.size(); }
  void resize(std::size_t count);  // to zeros
};

/// Points and weights of Gauss and Legendre on 0...1.
struct LegendreRule {
  std::vector<double> node, weight;
};

/// exp(-eta^2/2) eta^s sqrt(n!/(n+s)!) L_n^s(eta^2) for n = 0, 1, ...
struct Couplings {
  double lamb_dicke = -1;
  int order = 0;
  std::vector<double> value;
};

/// Couplings with weights and derivatives of these by the parameter.
struct WeightedCouplings {
  std::vector<double> x, weight, by_weight;
  std::size_t size() const { return x.size(); }
  void resize(std::size_t count);
};

}  // namespace detail

/// The caller's memory, reused from call to call; also keeps what calls have in common (points of quadrature, couplings of
/// motional levels). One workspace serves one thread.
struct EnsembleWorkspace {
  detail::Members members;
  std::array<detail::LegendreRule, 67> legendre;  // of 8, 16, ... 528 points, kept; the first holds the last of another size
  std::vector<detail::Couplings> couplings;  // one a mode
  detail::WeightedCouplings levels, product, mode, merged;
  std::vector<double> scratch;  // of one step
  std::vector<double> rows;     // members' populations and derivatives
  std::vector<double> lengths;
  std::vector<Rates> batch;
  Workspace two_level;
};

}  // namespace halfturn::dynamics
