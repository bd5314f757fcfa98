// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/quantity/constants.hpp"
#include "model/dynamics/pulse_shape.hpp"
#include "model/quantity/format.hpp"
#include "plugin/config/keys.hpp"
#include "plugin/config/sections.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

constexpr Range kAngles{0.0, 100.0 * constants::kPi, true, "above 0 and at most 100 pi"};
constexpr double kDefaultSpan = 4.0;  // without limits: from a quarter of the value to four times it

/// How the value of a pulse that is adjusted in length, or in amplitude, is written.
struct Valued {
  recalibrate::Adjust adjust;
  Dimension dimension;
  const char* value;     // its key
  const char* step;      // the key of its step
  const char* limits;    // what limits are
  const char* expected;  // in place of limits the wrong way round
};

constexpr Valued kLength{recalibrate::Adjust::length, Dimension::time, "length", "tick",
                         "the shortest and the longest length that may be proposed, such as [1 us, 20 us]", "[shortest, longest]"};
constexpr Valued kAmplitude{recalibrate::Adjust::amplitude, Dimension::number, "amplitude", "step",
                            "the smallest and the largest amplitude that may be proposed, such as [0.1, 0.9]", "[smallest, largest]"};

std::string text_of(const Valued& valued, double value) {
  return valued.adjust == recalibrate::Adjust::amplitude ? plain(value) : engineering(value, "s");
}

/// An amplitude of at most 1 is taken for a part of the full one.
void default_limits(recalibrate::Pulse& pulse) {
  const double value = pulse.configured();
  pulse.minimum = value / kDefaultSpan;
  pulse.maximum = value * kDefaultSpan;
  if (pulse.adjust == recalibrate::Adjust::amplitude && value <= 1.0) pulse.maximum = std::min(pulse.maximum, 1.0);
}

void read_limits(Reader& reader, const Place& at, const Valued& valued, recalibrate::Pulse& pulse) {
  default_limits(pulse);
  const auto pair = reader.pair(at, valued.dimension, kPositive, valued.dimension, kPositive, valued.limits);
  if (!pair) return;
  if (pair->first >= pair->second)
    return reader.fault(at, "found a lower end that is not below the upper one, expected " + std::string(valued.expected));
  pulse.minimum = pair->first;
  pulse.maximum = pair->second;
  const double value = pulse.configured();
  if (value > 0.0 && (value < pair->first || value > pair->second))
    reader.fault(at, "found limits that do not hold the " + std::string(valued.value) + " of " + text_of(valued, value) +
                         ", expected limits around it");
}

/// Whether a value that can be played lies within the limits.
void check_step(Reader& reader, const Place& at, const Valued& valued, const recalibrate::Pulse& pulse) {
  if (!at || pulse.step <= 0.0 || pulse.configured() <= 0.0) return;
  const double last = std::floor(pulse.maximum / pulse.step * (1.0 + 1e-12)) * pulse.step;
  if (last < pulse.minimum * (1.0 - 1e-12))
    reader.fault(at, "found " + wire::in_quotes(at.node->text) + ", of which no multiple lies within the limits, expected a " +
                         (valued.adjust == recalibrate::Adjust::amplitude ? "smaller" : "shorter") + " " + valued.step);
}

/// The keys of a pulse that is adjusted otherwise.
void check_adjusted(Reader& reader, const Place& at, const Valued& valued) {
  if (valued.adjust == recalibrate::Adjust::amplitude) {
    if (at["tick"])
      reader.fault(at["tick"], "found a tick, expected none: the length of a pulse with adjust: amplitude is fixed; `step` is that of its amplitude");
    return;
  }
  for (const char* key : {"amplitude", "step"})
    if (at[key])
      reader.fault(at[key], "found " + wire::in_quotes(key) + " in a pulse whose length is adjusted, expected adjust: amplitude beside it");
}

void read_shape(Reader& reader, const Place& at, recalibrate::Pulse& pulse) {
  if (!at || !reader.map(at, {keys::kShape})) return;
  const auto kind = reader.choice(reader.need(at, "kind", listed(keys::kShapes)), keys::kShapes);
  const Place edge = at["edge"], width = at["width"];
  const auto edge_s = reader.quantity(edge, Dimension::time, kNotNegative);
  const auto cut = reader.quantity(width, Dimension::number,
                                   {1.0, 100.0, true, "above 1 and at most 100: the whole pulse over its length"});
  if (!kind) return;
  const auto shape = static_cast<dynamics::Envelope>(*kind);
  if (edge && shape != dynamics::Envelope::square)
    reader.fault(edge, "found an edge, expected none: only a square pulse has edges of its own");
  if (width && shape != dynamics::Envelope::gaussian) reader.fault(width, "found a width, expected none: only a Gaussian is cut");
  if (shape == dynamics::Envelope::gaussian)
    reader.need(at, "width", "where the Gaussian is cut: the whole pulse over its length at half amplitude, such as 3");
  const double shortest = pulse.adjust == recalibrate::Adjust::length ? pulse.minimum : pulse.length_s;
  if (edge_s && pulse.length_s > 0.0 && *edge_s > shortest)
    reader.fault(edge, "found " + wire::in_quotes(edge.node->text) + ", expected an edge of at most the shortest pulse, " +
                           engineering(shortest, "s"));
  dynamics::PulseShape played;
  played.envelope = shape;
  played.cut = cut.value_or(played.cut);
  // What an area would be refused for has been said above, at its place.
  if (const auto factor = dynamics::area_factor(played, pulse.length_s)) pulse.area_factor = *factor;
}

}  // namespace

recalibrate::Pulse read_pulse(Reader& reader, const Place& at) {
  recalibrate::Pulse pulse;
  pulse.name = at.node->key;
  if (!reader.map(at, {keys::kPulse})) return pulse;
  if (const auto adjust = reader.choice(at["adjust"], keys::kAdjust)) pulse.adjust = static_cast<recalibrate::Adjust>(*adjust);
  const Valued& valued = pulse.adjust == recalibrate::Adjust::amplitude ? kAmplitude : kLength;
  check_adjusted(reader, at, valued);
  pulse.angle_rad =
      reader.quantity(reader.need(at, "angle", "the angle of the pulse, such as pi/2"), Dimension::angle, kAngles)
          .value_or(0.0);
  pulse.length_s =
      reader.quantity(reader.need(at, "length", "the length in force, such as 4 us"), Dimension::time, kPositive)
          .value_or(0.0);
  if (valued.adjust == recalibrate::Adjust::amplitude)
    pulse.amplitude = reader
                          .quantity(reader.need(at, "amplitude", "the relative drive amplitude in force, such as 0.5"), Dimension::number, kPositive)
                          .value_or(0.0);
  if (at[valued.step]) pulse.step = reader.quantity(at[valued.step], valued.dimension, kNotNegative).value_or(0.0);
  read_limits(reader, at["limits"], valued, pulse);
  check_step(reader, at[valued.step], valued, pulse);
  read_shape(reader, at["shape"], pulse);
  return pulse;
}

}  // namespace halfturn::config
