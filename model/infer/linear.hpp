// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <Eigen/Core>

/// Small vectors and matrices that live on the stack: nothing in the fitting loop asks for memory.
namespace halfturn::infer {

/// The most free parameters that a fit may have.
inline constexpr int kMaxParameters = 12;

using Vector = Eigen::Matrix<double, Eigen::Dynamic, 1, Eigen::ColMajor, kMaxParameters, 1>;
using Matrix = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::ColMajor, kMaxParameters, kMaxParameters>;

}  // namespace halfturn::infer
