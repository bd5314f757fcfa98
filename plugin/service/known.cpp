// SPDX-License-Identifier: Apache-2.0
#include "plugin/service/known.hpp"

#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"
#include "model/recalibrate/pulse_value.hpp"

namespace halfturn::service {
namespace {

using constants::kTwoPi;
using infer::Dynamics;

infer::Readout::Kind readout_of(wire::ReadoutKind kind) {
  switch (kind) {
    case wire::ReadoutKind::binomial: return infer::Readout::Kind::binomial;
    case wire::ReadoutKind::gaussian: return infer::Readout::Kind::gaussian;
    case wire::ReadoutKind::poisson: return infer::Readout::Kind::poisson;
  }
  return infer::Readout::Kind::binomial;
}

/// The known lifetime: what decays between the two states, and what leaves them.
void add_lifetime(const atom::Transition& transition, infer::Prior& prior) {
  if (!transition.linewidth_hz) return;
  const double total = kTwoPi * *transition.linewidth_hz;
  const double within = kTwoPi * transition.state_linewidth_hz.value_or(transition.partial_linewidth_hz.value_or(*transition.linewidth_hz));
  prior.decay = std::min(within, total);
  prior.loss = total - prior.decay;
}

void add_readout(const config::Drive& drive, const wire::Scan& scan, infer::Prior& prior, std::vector<std::string>& assumed) {
  if (drive.readout_kind != scan.readout_kind) {
    if (drive.floor || drive.contrast)
      assumed.push_back("readout: floor and contrast are free, for the configured ones are of another kind of readout");
    return;
  }
  prior.floor = drive.floor;
  prior.contrast = drive.contrast;
}

void add_detuning(const config::Drive* drive, const recalibrate::State& state, const wire::Scan& scan, recalibrate::Time taken_at,
                  infer::Prior& prior, std::vector<std::string>& assumed) {
  const auto line = state.line.predict(taken_at);
  const double carrier = scan.carrier_hz ? kTwoPi * *scan.carrier_hz : state.carrier;
  if (line && std::isfinite(carrier)) {
    prior.detuning = infer::Known{carrier - line->mean, line->sigma};
  } else if (drive != nullptr && drive->carrier_uncertainty) {
    prior.detuning = infer::Known{0.0, *drive->carrier_uncertainty};
  } else if (scan.axis_kind != wire::AxisKind::detuning) {
    assumed.push_back("carrier_uncertainty: the carrier sits on the line");
  }
}

/// History's Rabi frequency holds at the amplitude it was tracked at. For a line at another it is scaled, and held as loosely as
/// an amplifier may be off its straight line; a flop at another tells for itself.
std::optional<infer::Known> history_of(const recalibrate::State& state, const wire::Scan& scan, recalibrate::Time taken_at) {
  using recalibrate::kAmplifier;
  auto known = state.rabi.predict(taken_at);
  const double taken = scan.drive_amplitude.value_or(recalibrate::kAbsent);
  if (!known || recalibrate::same_amplitude(state.drive_amplitude, taken)) return known;
  if (scan.axis_kind == wire::AxisKind::duration) return std::nullopt;
  const double ratio = std::log(taken / state.drive_amplitude);
  return infer::Known{known->mean + ratio, std::hypot(known->sigma, kAmplifier * ratio)};
}

/// The tracked coupling per amplitude as rotation per amplitude of this scan's pulse.
std::optional<infer::Known> rotation_of(const recalibrate::State& state, const wire::Scan& scan, const infer::Known& dead_time,
                                        recalibrate::Time taken_at) {
  const auto known = state.gain.predict(taken_at);
  const double length = scan.pulse_s.value_or(0.0) - dead_time.mean;
  if (!known || !(length > 0.0)) return std::nullopt;
  return infer::Known{known->mean + std::log(length), std::hypot(known->sigma, dead_time.sigma / length)};
}

/// What a scan of amplitudes takes for granted beside the others.
void assume_of_amplitudes(const config::Drive* drive, const wire::Scan& scan, std::vector<std::string>& assumed) {
  const auto limit = infer::sampling_of(infer::Axis::amplitude, scan.axis).limit;
  const double length = scan.pulse_s.value_or(0.0);
  assumed.push_back("sampling: the Rabi frequency per unit of amplitude lies below the scan's sampling limit, " +
                    engineering(limit / (kTwoPi * length), "Hz"));
  assumed.push_back("response: the coupling follows the amplitude from 0 on, with a gain that bends smoothly; amplitude 0 is no light at all");
  if (drive == nullptr) return;
  for (const auto& pulse : drive->pulses)
    if (pulse.adjust == recalibrate::Adjust::amplitude && pulse.area_factor != 1.0)
      assumed.push_back("shape: the pulses of the scan were square, of the peak amplitude given; `" + pulse.name + "` is shaped");
}

/// For a line: what the pulses in force say of the Rabi frequency, which decides among modes alone. Nothing at another amplitude than
/// theirs; one that is stated stands against the tracked one, or against 1.
std::optional<double> rough_log_rabi(const config::Drive& drive, const recalibrate::State& state, const wire::Scan& scan) {
  if (scan.axis_kind != wire::AxisKind::detuning || drive.pulses.empty()) return std::nullopt;
  const double tracked = std::isfinite(state.drive_amplitude) ? state.drive_amplitude : 1.0;
  if (!recalibrate::same_amplitude(tracked, scan.drive_amplitude.value_or(tracked))) return std::nullopt;
  double sum = 0.0;
  int told = 0;
  for (const auto& pulse : drive.pulses) {
    if (pulse.adjust == recalibrate::Adjust::amplitude) continue;  // right at its own amplitude, not at the scan's
    ++told;
    const double length = recalibrate::in_force(state, pulse);
    if (!(length > 0.0)) return std::nullopt;
    sum += std::log(pulse.angle_rad / (pulse.area_factor * length));
  }
  return told > 0 ? std::optional(sum / told) : std::nullopt;
}

/// The dead time as configured and as the drive's scans so far tell it, which have no prior in them: both together, or the scans alone
/// where they lie far from the configuration. Never narrower than half a nanosecond, or a fiftieth of what is configured; and wider
/// with the root of the hours since the last scan, for nobody says what was done to the switch.
void add_dead_time(const config::Drive* drive, const recalibrate::State& state, recalibrate::Time taken_at, infer::Prior& prior,
                   std::vector<std::string>& assumed) {
  constexpr double kLeast = 0.5e-9, kPart = 0.02, kFarApart = 3.0;
  const bool stated = drive != nullptr && drive->dead_time;
  const infer::Known configured = stated ? *drive->dead_time : infer::Prior{}.dead_time;
  prior.dead_time = configured;
  if (const auto scans = state.dead_time.known(); scans && configured.sigma > 0.0) {
    const double hours = std::max(0.0, static_cast<double>(taken_at - state.dead_time.at()) / 3.6e12);
    const infer::Known seen{scans->mean, std::hypot(scans->sigma, std::max(kLeast, kPart * configured.sigma) * std::sqrt(1.0 + hours))};
    const double a = 1.0 / (seen.sigma * seen.sigma), b = 1.0 / (configured.sigma * configured.sigma);
    const bool apart = std::abs(seen.mean - configured.mean) > kFarApart * std::hypot(seen.sigma, configured.sigma);
    const infer::Known both{(a * seen.mean + b * configured.mean) / (a + b), 1.0 / std::sqrt(a + b)};
    prior.dead_time = apart ? seen : both;
    prior.dead_time_otherwise = configured;
  }
  if (stated) return;
  assumed.push_back(prior.dead_time_otherwise ? "switching: the dead time that the scans so far show, " +
                                                    with_uncertainty(prior.dead_time.mean, prior.dead_time.sigma, "s")
                                              : "switching: a dead time of 0 +- 100 ns");
}

infer::DynamicsSet candidates_of(const config::Drive* drive, const wire::Options& options) {
  auto set = infer::DynamicsSet::none();
  for (const auto& name : options.dynamics)
    if (const auto dynamics = infer::dynamics_named(name)) set.add(*dynamics);
  if (!set.empty()) return set;
  if (drive != nullptr && drive->dynamics) return *drive->dynamics;
  set = infer::DynamicsSet{};
  if (drive == nullptr || drive->motion.empty()) set.remove(Dynamics::thermal);
  // On a sideband every coupling depends on the motion: only a thermal state says what the bare one is.
  const auto sideband = [](const dynamics::Mode& mode) { return mode.sideband != 0; };
  if (drive != nullptr && std::any_of(drive->motion.begin(), drive->motion.end(), sideband)) {
    set = infer::DynamicsSet::none();
    set.add(Dynamics::thermal);
  }
  return set;
}

std::string all_dynamics() {
  std::string all;
  for (const auto name : infer::kDynamicsNames) all += (all.empty() ? "" : ", ") + std::string(name);
  return all;
}

}  // namespace

ModelScan model_scan(const wire::Scan& scan) {
  ModelScan model{scan.axis, {}};
  constexpr infer::Axis kAxes[] = {infer::Axis::duration, infer::Axis::detuning, infer::Axis::amplitude};  // as wire::AxisKind
  if (scan.axis_kind == wire::AxisKind::detuning)
    for (double& detuning : model.axis) detuning *= kTwoPi;
  model.batch.kind = kAxes[static_cast<std::size_t>(scan.axis_kind)];
  model.batch.axis = model.axis;
  model.batch.readout = readout_of(scan.readout_kind);
  model.batch.observed = scan.observed.front();
  model.batch.weight = scan.weight.front();
  if (!scan.at_s.empty()) model.batch.at_s = scan.at_s;
  model.batch.pulse_length_s = scan.pulse_s.value_or(0.0);
  if (scan.references)
    model.batch.references =
        infer::References{scan.references->bright, scan.references->bright_of, scan.references->dark, scan.references->dark_of};
  return model;
}

infer::Prior prior_for(const config::Drive* drive, const recalibrate::State& state, const wire::Scan& scan, const wire::Options& options,
                       recalibrate::Time taken_at, std::vector<std::string>& assumed) {
  infer::Prior prior;
  prior.start.prepared = scan.prepared_excited ? dynamics::Prepared::excited : dynamics::Prepared::ground;
  prior.candidates = candidates_of(drive, options);
  const bool of_amplitudes = scan.axis_kind == wire::AxisKind::amplitude;
  if (!of_amplitudes) prior.log_rabi = history_of(state, scan, taken_at);
  if (drive != nullptr) {
    if (!of_amplitudes) prior.expect = drive->expect;
    prior.start.impurity = drive->impurity;
    prior.start.lost_reads = drive->lost_reads;
    prior.motion = drive->motion;
    prior.follows_intensity = drive->transition && drive->transition->multipole == atom::Multipole::two_photon;
    if (drive->transition) add_lifetime(*drive->transition, prior);
    add_readout(*drive, scan, prior, assumed);
    prior.rough_log_rabi = rough_log_rabi(*drive, state, scan);
    if (prior.rough_log_rabi && !prior.log_rabi)
      assumed.push_back("pulses: a line whose pulse area is far from what the pulses in force say is less likely");
  }
  add_dead_time(drive, state, taken_at, prior, assumed);
  add_detuning(drive, state, scan, taken_at, prior, assumed);
  if (of_amplitudes) {
    prior.log_rabi = rotation_of(state, scan, prior.dead_time, taken_at);
    assume_of_amplitudes(drive, scan, assumed);
  }
  if (!prior.expect && scan.axis_kind == wire::AxisKind::duration) {
    const auto limit = infer::sampling_of(infer::Axis::duration, scan.axis).limit;
    assumed.push_back("expect: the Rabi frequency lies below the scan's sampling limit, " + engineering(limit / kTwoPi, "Hz"));
  }
  return prior;
}

infer::FitOptions fit_options(const config::Drive* drive, const wire::Options& options) {
  infer::FitOptions fit;
  if (options.level) fit.level = *options.level;
  if (drive == nullptr) return fit;
  fit.rival_margin = drive->accept.rival_margin;
  fit.least_evidence = drive->accept.min_evidence;
  for (const auto& pulse : drive->pulses)
    fit.pulses.push_back({pulse.angle_rad, pulse.area_factor, pulse.adjust == recalibrate::Adjust::amplitude ? pulse.length_s : 0.0});
  return fit;
}

recalibrate::Context context_for(const config::Drive* drive, const wire::Scan& scan, const infer::Prior& prior, recalibrate::Time taken_at) {
  recalibrate::Context context;
  context.taken_at = taken_at;
  context.expect = prior.expect;
  if (scan.carrier_hz) context.carrier = kTwoPi * *scan.carrier_hz;
  if (scan.drive_amplitude) context.drive_amplitude = *scan.drive_amplitude;
  if (drive == nullptr) return context;
  context.pulses = drive->pulses;
  context.accept = drive->accept;
  if (drive->transition && std::isfinite(drive->transition->frequency_hz))
    context.transition_frequency = kTwoPi * drive->transition->frequency_hz;
  return context;
}

Result<void> check_scan(const wire::Request& request, const config::Configuration& configuration) {
  for (std::size_t i = 0; i < request.scans.size(); ++i) {
    const auto& each = request.scans[i];
    const std::string place = request.joint ? "scans[" + std::to_string(i) + "]" : std::string("scan");
    if (request.joint && each.axis_kind == wire::AxisKind::amplitude)
      return fault("not_available", place + ".amplitude", "amplitude scans have no part in a joint fit in this version; send them as `scan`");
    if (!each.sites.empty() || each.observed.size() != 1)
      return fault("not_available", place + ".sites", "scans of many sites are not available in this version; send one scan a site");
  }
  const auto& scan = request.scans.front();
  for (std::size_t i = 0; i < request.options.dynamics.size(); ++i) {
    const auto& name = request.options.dynamics[i];
    const std::string where = "options.dynamics[" + std::to_string(i) + "]";
    const auto dynamics = infer::dynamics_named(name);
    if (!dynamics) return fault("bad_value", where, "found `" + name + "`, expected one of " + all_dynamics());
    const auto drive = configuration.drives.find(scan.drive);
    if (*dynamics == Dynamics::thermal && (drive == configuration.drives.end() || drive->second.motion.empty()))
      return fault("bad_value", where, "found `thermal`, which needs the drive's `motion` in the configuration, such as {lamb_dicke: 0.08}");
  }
  if (request.options.store && configuration.drives.count(scan.drive) == 0) {
    std::string known;
    for (const auto& [name, drive] : configuration.drives) known += (known.empty() ? "" : ", ") + name;
    return fault("unknown_drive", "scan.drive", "found `" + scan.drive + "`, which the configuration does not have; it has " + known);
  }
  return {};
}

}  // namespace halfturn::service
