// SPDX-License-Identifier: Apache-2.0
#include <utility>

#include "model/infer/line_modes.hpp"

/// The intervals at a second level: for who checks that those of both levels hold what they should, without a second search.
namespace halfturn::infer {

void estimate_second(const Problem& problem, std::span<const ModeSolutions> modes, std::size_t chosen, Fit& fit, FitWorkspace& work) {
  if (!(problem.options.second_level > 0.0)) return;
  FitOptions options = problem.options;
  options.level = options.second_level;
  const Problem again{problem.scan, problem.readout, problem.prior, options, problem.sampling, problem.measured};
  Fit second = fit;
  second.pulse_length_s.clear();
  estimate(again, modes[chosen], second, work);
  if (problem.scan.kind == Axis::detuning) widen_offset(again, modes, chosen, second);
  fit.second = {second.line_offset, std::move(second.pulse_length_s)};
}

}  // namespace halfturn::infer
