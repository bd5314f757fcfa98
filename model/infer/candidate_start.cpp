// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/solution.hpp"

/// Where the fit of one candidate begins when the oscillation is known from elsewhere.
namespace halfturn::infer {
namespace {

// An oscillation that fades in less than this many times the scan's length is begun with that much, or a start would have no damping.
constexpr double kLeastEnvelope = 0.2, kUndampedEnvelope = 0.1;

double length_scale(const Problem& problem) {
  return problem.scan.kind == Axis::duration ? problem.sampling.span : problem.scan.pulse_length_s;
}

/// Relative spread of the coupling whose oscillation at `frequency` has fallen to 1/e after 1/envelope: exp(-(s W t)^2/2).
double spread_for(double envelope, double frequency) { return std::clamp(std::sqrt(2.0) * envelope / frequency, 0.003, 0.25); }

/// Mean phonons whose couplings, by eta^2 sqrt(n (n+1)) of each mode, spread so widely (to first order in eta^2; Leibfried et al.,
/// Rev. Mod. Phys. 75, 281 (2003)).
double phonons_for(std::span<const dynamics::Mode> modes, double spread) {
  double square = 0.0;
  for (const auto& mode : modes) square += std::pow(mode.lamb_dicke, 4) * std::pow(mode.phonon_ratio, 2);
  const double wanted = spread / std::sqrt(std::max(square, 1e-12));
  return std::clamp(0.5 * (std::sqrt(1.0 + 4.0 * wanted * wanted) - 1.0), 0.02, 100.0);
}

/// Rates of the candidate that damp an oscillation on resonance at `envelope`: gamma_phi/2, 3 Gamma/4, Gamma_loss/2 (Torrey 1949).
void add_damping(const Problem& problem, Dynamics candidate, double envelope, double frequency, Physical& start) {
  const double spread = spread_for(envelope, frequency);
  switch (candidate) {
    case Dynamics::undamped: return;
    case Dynamics::dephasing: start.damping = 2.0 * envelope; return;
    case Dynamics::decay: start.damping = envelope / 0.75; return;
    case Dynamics::leak: start.damping = 2.0 * envelope; return;
    case Dynamics::decay_dephasing:
      start.damping = 0.5 * envelope / 0.75;
      start.dephasing = envelope;
      return;
    case Dynamics::leak_dephasing:
      start.damping = envelope;
      start.dephasing = envelope;
      return;
    case Dynamics::spread: start.breadth = spread * spread; return;
    // The envelope of couplings distributed as 1 - m y, y as exp(-y), is (1 + (m W t)^2)^(-1/2): a half where m W t = 1.7.
    case Dynamics::cloud: start.breadth = std::min(0.3, 1.8 * spread / (problem.prior.follows_intensity ? 4.0 : 2.0)); return;
    case Dynamics::thermal: start.breadth = phonons_for(problem.prior.motion, 1.8 * spread); return;
    // The amplitude of a Doppler flop falls as (1 + (sigma^2 t / Omega)^2)^(-1/4): to 0.56 where sigma^2 t = 3 Omega.
    case Dynamics::doppler: start.breadth = std::min(3.0 * envelope * frequency, 0.5 * frequency * frequency); return;
  }
}

/// The start with this apparent frequency.
Physical begun(const Problem& problem, Dynamics candidate, const Physical& from, double frequency, double envelope, FitWorkspace& work) {
  Physical start = from;
  start.damping = start.dephasing = start.breadth = 0.0;
  add_damping(problem, candidate, envelope, frequency, start);
  const ScanObjective objective(problem.scan, problem.readout, problem.prior, candidate, {}, start.contrast() < 0.0, work.objective);
  if (candidate == Dynamics::doppler && problem.scan.kind == Axis::detuning) {
    start.breadth = 4.0 * envelope * envelope;  // about as wide as what dephasing makes of the line
  } else if (candidate == Dynamics::doppler) {
    const double longest = *std::max_element(problem.scan.axis.begin(), problem.scan.axis.end());
    start.generalised = frequency - doppler_shift(frequency, start.breadth, longest);
  } else if (is_ensemble(candidate)) {
    start.generalised = frequency;
    for (int i = 0; i < 3; ++i) {  // to a hundredth of a resolution element
      const double ratio = objective.apparent_frequency(start) / frequency;
      if (ratio > 0.0) start.generalised /= ratio;
    }
  }
  return start;
}

}  // namespace

double envelope_of(const Solution& solution) {
  const auto& p = solution.physical;
  switch (solution.dynamics) {
    case Dynamics::dephasing: return 0.5 * p.damping;
    case Dynamics::decay: return 0.75 * p.damping;
    case Dynamics::leak: return 0.5 * p.damping;
    default: return 0.0;
  }
}

Physical first_start(const Problem& problem, Dynamics candidate, const Mode& mode, FitWorkspace& work) {
  const double envelope = mode.damped ? mode.start.damping : kUndampedEnvelope / length_scale(problem);
  return begun(problem, candidate, mode.start, mode.start.generalised, envelope, work);
}

Physical start_for(const Problem& problem, Dynamics candidate, const Solution& from, double factor, FitWorkspace& work) {
  const double envelope = factor * std::max(kLeastEnvelope / length_scale(problem), envelope_of(from));
  return begun(problem, candidate, from.physical, from.apparent, envelope, work);
}

}  // namespace halfturn::infer
