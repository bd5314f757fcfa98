// SPDX-License-Identifier: Apache-2.0
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
constexpr double kDefaultSpan = 4.0;  // without limits: from a quarter of the length to four times it

void read_limits(Reader& reader, const Place& at, recalibrate::Pulse& pulse) {
  pulse.minimum_s = pulse.length_s / kDefaultSpan;
  pulse.maximum_s = pulse.length_s * kDefaultSpan;
  const auto pair = reader.pair(at, Dimension::time, kPositive, Dimension::time, kPositive,
                                "the shortest and the longest length that may be proposed, such as [1 us, 20 us]");
  if (!pair) return;
  if (pair->first >= pair->second)
    return reader.fault(at, "found a lower end that is not below the upper one, expected [shortest, longest]");
  pulse.minimum_s = pair->first;
  pulse.maximum_s = pair->second;
  if (pulse.length_s > 0.0 && (pulse.length_s < pair->first || pulse.length_s > pair->second))
    reader.fault(at, "found limits that do not hold the length of " + engineering(pulse.length_s, "s") +
                         ", expected limits around it");
}

/// Whether a length that can be played lies within the limits.
void check_tick(Reader& reader, const Place& at, const recalibrate::Pulse& pulse) {
  if (!at || pulse.tick_s <= 0.0 || pulse.length_s <= 0.0) return;
  const double last = std::floor(pulse.maximum_s / pulse.tick_s * (1.0 + 1e-12)) * pulse.tick_s;
  if (last < pulse.minimum_s * (1.0 - 1e-12))
    reader.fault(at, "found " + wire::in_quotes(at.node->text) +
                         ", of which no multiple lies within the limits, expected a shorter tick");
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
  if (edge_s && pulse.length_s > 0.0 && *edge_s > pulse.minimum_s)
    reader.fault(edge, "found " + wire::in_quotes(edge.node->text) + ", expected an edge of at most the shortest pulse, " +
                           engineering(pulse.minimum_s, "s"));
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
  if (!reader.map(at, {keys::kPulse, keys::kPulseLater})) return pulse;
  reader.choice(at["adjust"], keys::kAdjust, keys::kAdjustLater);
  pulse.angle_rad =
      reader.quantity(reader.need(at, "angle", "the angle of the pulse, such as pi/2"), Dimension::angle, kAngles)
          .value_or(0.0);
  pulse.length_s =
      reader.quantity(reader.need(at, "length", "the length in force, such as 4 us"), Dimension::time, kPositive)
          .value_or(0.0);
  pulse.tick_s = reader.quantity(at["tick"], Dimension::time, kNotNegative).value_or(0.0);
  read_limits(reader, at["limits"], pulse);
  check_tick(reader, at["tick"], pulse);
  read_shape(reader, at["shape"], pulse);
  return pulse;
}

}  // namespace halfturn::config
