// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <optional>
#include <span>

#include "model/infer/likelihood.hpp"

namespace halfturn::infer {

enum class Axis : std::uint8_t { duration, detuning, amplitude };

/// Bright and dark references taken beside a scan, in the scan's own readout: counts of shots, or photons of exposures. Which
/// of them is the signal of the ground state follows from the sign of the contrast: the dark one where it is positive.
struct References {
  double bright = 0.0, bright_of = 0.0;
  double dark = 0.0, dark_of = 0.0;
};

/// Scans of one or more sites on a common axis, as arrays that somebody else owns. `axis` in s (duration), rad/s (detuning
/// from the present carrier) or relative drive amplitudes of at least 0, in any order, repeats allowed; `observed` and `weight` hold sites*points values, site by site
/// (likelihood.hpp says what they mean for each readout; a point that was not measured has the weight 0, or an infinite sigma).
struct ScanBatch {
  Axis kind = Axis::duration;
  std::span<const double> axis;
  Readout::Kind readout = Readout::Kind::binomial;
  std::span<const double> observed;
  std::span<const double> weight;
  double pulse_length_s = 0.0;  // of a detuning or amplitude scan
  std::optional<References> references;
  std::span<const double> at_s;  // when each point was taken; empty: one after another, in their order
  /// The same from -1/2 at the first to 1/2 at the last; filled by the fit, empty where a drift does not matter.
  std::span<const double> progress;

  std::size_t points() const { return axis.size(); }
  std::size_t sites() const { return axis.empty() ? 0 : observed.size() / axis.size(); }
  Readout site(std::size_t i) const {
    return {readout, observed.subspan(i * points(), points()), weight.subspan(i * points(), points())};
  }
};

}  // namespace halfturn::infer
