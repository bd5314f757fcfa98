// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/infer/amplitude_response.hpp"
#include "model/infer/scan_objective.hpp"

/// The signal of a scan of the drive amplitude and its derivatives: pulses of one length l (less the dead time), the coupling at
/// each point Omega = K g(a) / l with K = Physical::generalised and g of amplitude_response.hpp.
namespace halfturn::infer {
namespace {

// |Delta| is taken as at least this part of the largest coupling while Delta^2 is fitted (scan_objective.cpp says why).
constexpr double kLeastDetuning = 1e-4;

}  // namespace

double ScanObjective::amplitude_lead(const Physical& p) const {
  if (lead_.kind != Lead::Kind::per_amplitude && lead_.kind != Lead::Kind::pulse_amplitude) return p.generalised;
  const double coupling = p.generalised / effective_length(p);
  if (lead_.kind == Lead::Kind::per_amplitude) return coupling;
  return expanded(lead_.angle_rad / (lead_.area_factor * (lead_.length_s - p.dead_time) * coupling), p.compression);
}

double ScanObjective::from_amplitude_lead(double lead, const Physical& p) const {
  if (lead_.kind == Lead::Kind::per_amplitude) return lead * effective_length(p);
  if (lead_.kind != Lead::Kind::pulse_amplitude) return lead;
  return lead_.angle_rad * effective_length(p) / (lead_.area_factor * (lead_.length_s - p.dead_time) * compressed(lead, p.compression));
}

dynamics::Rates ScanObjective::rates_at(const Physical& p, double amplitude) const {
  dynamics::Rates rates;
  rates.decay = prior_.decay;
  rates.loss = prior_.loss;
  if (candidate_ == Dynamics::dephasing) rates.dephasing = p.damping;
  if (candidate_ == Dynamics::decay) rates.decay += p.damping;
  if (candidate_ == Dynamics::leak) rates.loss += p.damping;
  rates.detuning = std::sqrt(p.detuning_square);
  rates.rabi = p.generalised / effective_length(p) * compressed(amplitude, p.compression);
  return rates;
}

dynamics::Status ScanObjective::populate_amplitudes(const Physical& p, const dynamics::Derivatives& out) const {
  const auto n = scan_.points();
  const double length = effective_length(p);
  dynamics::Rates at = rates(p);
  if (layout_.detuning_square >= 0) at.detuning = std::max(at.detuning, kLeastDetuning * at.rabi);
  for (std::size_t i = 0; i < n; ++i) {
    at.rabi = p.generalised / length * compressed(scan_.axis[i], p.compression);
    work_.sets[i] = at;
  }
  dynamics::duration_scan({work_.sets.data(), n}, prior_.start, {&length, 1}, {}, out, {work_.statuses.data(), n}, work_.dynamics);
  const auto end = work_.statuses.begin() + static_cast<std::ptrdiff_t>(n);
  const auto failed = std::find_if(work_.statuses.begin(), end, [](dynamics::Status s) { return s != dynamics::Status::ok; });
  return failed == end ? dynamics::Status::ok : *failed;
}

/// d Omega / d parameter at each point is that of K g(a) / l; K itself depends on dead time and compression where the lead is
/// another coordinate.
void ScanObjective::fill_amplitude_columns(const Physical& p) const {
  const auto n = scan_.points();
  const double contrast = p.contrast(), length = effective_length(p);
  const bool of_pulse = lead_.kind == Lead::Kind::pulse_amplitude;
  // K by the lead, and at fixed lead by the dead time and the compression.
  double by_lead = 1.0, by_dead = 0.0, by_compression = 0.0;
  if (lead_.kind == Lead::Kind::per_amplitude) {
    by_lead = length;
    by_dead = -p.generalised / length;
  } else if (of_pulse) {
    const double amplitude = amplitude_lead(p), g = compressed(amplitude, p.compression);
    by_lead = -p.generalised * logarithmic_slope(amplitude, p.compression);
    by_dead = p.generalised * (1.0 / (lead_.length_s - p.dead_time) - 1.0 / length);
    by_compression = -p.generalised * compressed_by_compression(amplitude, p.compression) / g;
  }
  auto put = [this](int slot, std::size_t i, double value) {
    if (slot >= 0) column(slot)[i] = value;
  };
  for (std::size_t i = 0; i < n; ++i) {
    const double amplitude = scan_.axis[i], g = compressed(amplitude, p.compression);
    const double by_rotation = contrast * work_.by_rate[0][i] / length;  // signal by K g
    put(layout_.lead, i, by_rotation * g * by_lead);
    if (layout_.detuning_square >= 0) put(layout_.detuning_square, i, 0.5 * contrast * work_.by_rate[1][i] / work_.sets[i].detuning);
    if (layout_.dead_time >= 0)
      put(layout_.dead_time, i, by_rotation * g * (p.generalised / length + by_dead) - contrast * work_.by_length[i]);
    if (layout_.damping >= 0)
      put(layout_.damping, i, contrast * work_.by_rate[candidate_ == Dynamics::decay ? 2 : candidate_ == Dynamics::leak ? 3 : 4][i]);
    if (layout_.compression >= 0)
      put(layout_.compression, i,
          by_rotation * (g * by_compression + p.generalised * compressed_by_compression(amplitude, p.compression)));
    put(layout_.ground, i, 1.0 - work_.population[i]);
    put(layout_.excited, i, work_.population[i]);
  }
}

}  // namespace halfturn::infer
