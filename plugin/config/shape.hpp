// SPDX-License-Identifier: Apache-2.0
#pragma once

namespace halfturn::config {

enum class Shape { square, gaussian, blackman, raised_cosine };

/// Pulse area over peak times length, the length being the full width at half amplitude. 1 for square pulses with symmetric
/// edges and for the raised cosine sin^2(pi t/T), 1.035822 for Blackman's window (0.42 - 0.5 cos + 0.08 cos, Blackman and
/// Tukey 1958), sqrt(pi / (4 ln 2)) erf(cut sqrt(ln 2)) = 1.0645 erf(0.8326 cut) for a Gaussian whose whole pulse is `cut`
/// (above 1) times its length.
double area_factor(Shape shape, double cut);

}  // namespace halfturn::config
