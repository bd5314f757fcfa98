// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "plugin/config/keys.hpp"
#include "plugin/config/sections.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

using constants::kTwoPi;

constexpr Range kHalf{0.0, 0.5, false, "between 0 and 0.5"};
constexpr Range kUpToOne{0.0, 1.0, true, "above 0 and at most 1"};
constexpr Range kBelowOne{0.0, 1.0 - 0x1p-53, false, "of at least 0 and below 1"};
constexpr Range kLambDicke{0.0, 2.0, true, "above 0 and at most 2"};
constexpr Range kUpToPi{0.0, constants::kPi, true, "above 0 and at most pi"};

std::optional<infer::Known> known(Reader& reader, const Place& at, const char* expected) {
  const auto pair = reader.pair(at, Dimension::fraction, kAny, Dimension::fraction, kNotNegative, expected);
  return pair ? std::optional(infer::Known{pair->first, pair->second}) : std::nullopt;
}

/// Fractions of counts lie between 0 and 1, at both ends of the oscillation; signals and photons lie where they will.
void check_fractions(Reader& reader, const Place& at, const Drive& drive) {
  if (drive.contrast && drive.contrast->mean == 0.0)
    reader.fault(at["contrast"], "found a contrast of 0, expected one that shows the oscillation");
  if (drive.readout_kind != wire::ReadoutKind::binomial) return;
  if (drive.floor && (drive.floor->mean < 0.0 || drive.floor->mean > 1.0))
    reader.fault(at["floor"], "found " + wire::in_quotes(at["floor"].node->children[0].text) +
                                  ", expected a fraction of counts between 0 and 1");
  if (drive.contrast && std::abs(drive.contrast->mean) > 1.0)
    reader.fault(at["contrast"], "found " + wire::in_quotes(at["contrast"].node->children[0].text) +
                                     ", expected a fraction of counts between -1 and 1");
  if (!drive.floor || !drive.contrast) return;
  const double top = drive.floor->mean + drive.contrast->mean;
  const double slack = 1e-9;  // 0.02 + 0.98 is not quite 1 in binary
  const bool inside = top >= -slack && top <= 1.0 + slack;
  if (!inside && std::abs(drive.contrast->mean) <= 1.0 && drive.floor->mean >= 0.0 && drive.floor->mean <= 1.0)
    reader.fault(at["contrast"],
                 "found floor + contrast outside 0 to 1, expected fractions of counts (or kind: signal, kind: photons)");
}

void read_readout(Reader& reader, const Place& at, Drive& drive) {
  if (!at || !reader.map(at, {keys::kReadout})) return;
  if (const auto kind = reader.choice(at["kind"], keys::kReadoutKinds))
    drive.readout_kind = static_cast<wire::ReadoutKind>(*kind);
  drive.floor = known(reader, at["floor"], "its value and sigma, such as [0.02, 0.01]");
  drive.contrast = known(reader, at["contrast"], "its value and sigma, such as [0.93, 0.02]");
  check_fractions(reader, at, drive);
}

void read_expect(Reader& reader, const Place& at, Drive& drive) {
  if (!at || !reader.map(at, {keys::kExpect})) return;
  const Place rabi = reader.need(at, "rabi", "the lowest and the highest Rabi frequency, such as [10 kHz, 1 MHz]");
  const auto pair = reader.pair(rabi, Dimension::frequency, kPositive, Dimension::frequency, kPositive,
                                "the lowest and the highest Rabi frequency, such as [10 kHz, 1 MHz]");
  if (!pair) return;
  if (pair->first >= pair->second)
    reader.fault(rabi, "found a lower end that is not below the upper one, expected [lowest, highest]");
  drive.expect = infer::Expected{kTwoPi * pair->first, kTwoPi * pair->second};
}

void read_dynamics(Reader& reader, const Place& at, Drive& drive) {
  if (!at || !reader.list(at, "a list such as [undamped, dephasing]")) return;
  infer::DynamicsSet set = infer::DynamicsSet::none();
  for (const Node& child : at.node->children) {
    const auto one = reader.choice(at.child(child), infer::kDynamicsNames);
    if (!one) continue;
    if (set.has(static_cast<infer::Dynamics>(*one)))
      reader.fault(at.child(child), "found " + wire::in_quotes(child.text) + " a second time, expected it once");
    set.add(static_cast<infer::Dynamics>(*one));
  }
  drive.dynamics = set;
}

dynamics::Mode read_mode(Reader& reader, const Place& at) {
  dynamics::Mode mode;
  if (!reader.map(at, {keys::kMotion})) return mode;
  mode.lamb_dicke = reader.quantity(reader.need(at, "lamb_dicke", "the Lamb-Dicke parameter of the mode, such as 0.08"), Dimension::number,
                                    kLambDicke).value_or(0.0);
  mode.sideband = static_cast<int>(reader.integer(at["sideband"], -1, 1).value_or(0));
  mode.phonon_ratio = reader.quantity(at["phonon_ratio"], Dimension::number, kPositive).value_or(1.0);
  return mode;
}

/// One mode, or a list of them.
void read_motion(Reader& reader, const Place& at, Drive& drive) {
  if (!at) return;
  if (at.node->kind == Node::Kind::map) {
    drive.motion.push_back(read_mode(reader, at));
    return;
  }
  if (!reader.list(at, "a mode such as {lamb_dicke: 0.08}, or a list of them")) return;
  for (const Node& child : at.node->children) drive.motion.push_back(read_mode(reader, at.child(child)));
}

void check_motion(Reader& reader, const Place& dynamics, const Drive& drive) {
  if (!drive.dynamics || !drive.dynamics->has(infer::Dynamics::thermal) || !drive.motion.empty()) return;
  reader.fault(dynamics, "found thermal, which needs the drive's motion, expected it beside, such as motion: {lamb_dicke: 0.08}");
}

void read_switching(Reader& reader, const Place& at, Drive& drive) {
  if (!at || !reader.map(at, {keys::kSwitching})) return;
  const infer::Known normal = infer::Prior{}.dead_time;
  drive.dead_time = infer::Known{reader.quantity(at["dead_time"], Dimension::time).value_or(normal.mean),
                                 reader.quantity(at["uncertainty"], Dimension::time, kNotNegative).value_or(normal.sigma)};
}

void read_accept(Reader& reader, const Place& at, recalibrate::Accept& accept) {
  if (!at || !reader.map(at, {keys::kAccept})) return;
  const auto take = [&](const char* key, Dimension dimension, const Range& range, double& value) {
    value = reader.quantity(at[key], dimension, range).value_or(value);
  };
  take("max_step", Dimension::fraction, kUpToOne, accept.max_step);
  take("min_cycles", Dimension::number, kNotNegative, accept.min_cycles);
  take("max_angle_error", Dimension::angle, kUpToPi, accept.max_angle_error_rad);
  take("min_evidence", Dimension::number, kNotNegative, accept.min_evidence);
  take("rival_margin", Dimension::number, kNotNegative, accept.rival_margin);
  take("min_p_value", Dimension::number, kBelowOne, accept.min_p_value);
  take("max_carrier_step", Dimension::fraction, kPositive, accept.max_carrier_step);
  take("max_carrier_error", Dimension::fraction, kPositive, accept.max_carrier_error);
}

void read_beam(Reader& reader, const Place& at, Drive& drive) {
  if (!at || !reader.map(at, {keys::kBeam})) return;
  drive.waist_m =
      reader.quantity(reader.need(at, "waist", "the 1/e^2 radius of the beam, such as 45 um"), Dimension::length, kPositive);
}

void read_pulses(Reader& reader, const Place& at, Drive& drive) {
  if (!reader.map_of_names(at, "pulse")) return;
  for (const Node& child : at.node->children) drive.pulses.push_back(read_pulse(reader, at.child(child)));
}

}  // namespace

Drive read_drive(Reader& reader, const Place& at) {
  Drive drive;
  drive.name = at.node->key;
  if (!reader.map(at, {keys::kDrive, keys::kDriveLater})) return drive;
  drive.transition = read_transition(reader, at["transition"]);
  read_beam(reader, at["beam"], drive);
  if (const auto sigma = reader.quantity(at["carrier_uncertainty"], Dimension::frequency, kNotNegative))
    drive.carrier_uncertainty = kTwoPi * *sigma;
  read_readout(reader, at["readout"], drive);
  read_expect(reader, at["expect"], drive);
  read_dynamics(reader, at["dynamics"], drive);
  read_motion(reader, at["motion"], drive);
  check_motion(reader, at["dynamics"], drive);
  read_switching(reader, at["switching"], drive);
  if (const auto lost = reader.choice(at["lost_reads"], keys::kLostReads))
    drive.lost_reads = static_cast<dynamics::LostReads>(*lost);
  drive.impurity = reader.quantity(at["impurity"], Dimension::fraction, kHalf).value_or(0.0);
  read_pulses(reader, reader.need(at, "pulses", "at least one pulse by its name"), drive);
  read_accept(reader, at["accept"], drive.accept);
  return drive;
}

}  // namespace halfturn::config
