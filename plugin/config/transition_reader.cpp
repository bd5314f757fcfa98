// SPDX-License-Identifier: Apache-2.0
#include <algorithm>

#include "plugin/config/atoms.hpp"
#include "plugin/config/catalogue.hpp"
#include "plugin/config/keys.hpp"
#include "plugin/config/sections.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

constexpr int kLargest = 40;  // doubled: no atom has a spin or a projection of more than 20

std::optional<atom::Level> read_level(Reader& reader, const Place& at) {
  if (!at || !reader.map(at, {keys::kLevel})) return std::nullopt;
  atom::Level level;
  level.term = reader.text(at["term"], "a term such as 5S1/2").value_or(at.node->key);
  level.twice_J = read_doubled(reader, reader.need(at, "J", "the level's J, such as 3/2"), 0, kLargest).value_or(0);
  level.twice_F = read_doubled(reader, at["F"], 0, kLargest);
  level.twice_m = read_doubled(reader, at["m"], -kLargest, kLargest);
  level.twice_S = read_doubled(reader, at["S"], 0, kLargest);
  level.parity = read_parity(reader, at["parity"]);
  return level;
}

std::optional<atom::Polarisation> read_polarisation(Reader& reader, const Place& at) {
  const auto text = reader.text(at, "sigma-, pi or sigma+");
  if (!text) return std::nullopt;
  const auto polarisation = atom::read_polarisation(*text);
  if (!polarisation) reader.fault(at, "found " + wire::in_quotes(*text) + ", expected sigma-, pi or sigma+");
  return polarisation;
}

atom::InlineTransition read_numbers(Reader& reader, const Place& at) {
  atom::InlineTransition out;
  out.name = reader.text(at["name"], "a name").value_or("");
  out.multipole = read_multipole(reader, at["kind"]).value_or(out.multipole);
  out.wavelength_m = reader.quantity(at["wavelength"], Dimension::length, kPositive);
  out.frequency_hz = reader.quantity(at["frequency"], Dimension::frequency, kPositive);
  out.linewidth_hz = reader.quantity(at["linewidth"], Dimension::frequency, kPositive);
  out.lifetime_s = reader.quantity(at["lifetime"], Dimension::time, kPositive);
  out.branching = reader.quantity(at["branching"], Dimension::fraction, {0.0, 1.0, true, "above 0 and at most 1"});
  out.angular_factor = reader.quantity(at["angular_factor"], Dimension::number, {-1.0, 1.0, false, "between -1 and 1"});
  out.moment_C_m = reader.quantity(at["moment"], Dimension::dipole, kPositive);
  out.magnetic_moment_J_T = reader.quantity(at["magnetic_moment"], Dimension::magnetic, kPositive);
  out.lower = read_level(reader, at["lower"]);
  out.upper = read_level(reader, at["upper"]);
  out.twice_I = read_doubled(reader, at["nuclear_spin"], 0, kLargest).value_or(0);
  out.polarisation = read_polarisation(reader, at["polarisation"]);
  return out;
}

/// The number that a fault speaks of (`transition.linewidth_hz` is the key `linewidth`), else the whole transition.
Place culprit(const Place& at, std::string_view where) {
  const std::string_view field = where.substr(std::min(where.find('.'), where.size() - 1) + 1);
  for (const Node& child : at.node->children)
    if (field == child.key ||
        (field.starts_with(child.key) && (field[child.key.size()] == '_' || field[child.key.size()] == '.')))
      return at.child(child);
  return at;
}

std::optional<atom::Transition> keep(Reader& reader, const Place& at, Result<atom::Transition> transition) {
  if (transition) return std::move(*transition);
  const Fault& wrong = transition.error();
  std::string_view message = wrong.message;
  if (at.node->kind == Node::Kind::map) {
    reader.fault(culprit(at, wrong.where),
                 (message.starts_with("found") ? "" : "found too little for a transition: ") + wrong.message);
    return std::nullopt;
  }
  if (const std::string name = "'" + at.node->text + "': "; message.starts_with(name)) message.remove_prefix(name.size());
  reader.fault(at, "found " + wire::in_quotes(at.node->text) + ": " + std::string(message));
  return std::nullopt;
}

}  // namespace

std::optional<atom::Transition> read_transition(Reader& reader, const Place& at) {
  if (!at) return std::nullopt;
  if (at.node->kind == Node::Kind::map) {
    const std::size_t before = reader.faults.size();
    if (!reader.map(at, {keys::kTransition})) return std::nullopt;
    const atom::InlineTransition numbers = read_numbers(reader, at);
    return reader.faults.size() > before ? std::nullopt : keep(reader, at, atom::inline_transition(numbers));
  }
  const auto name = reader.text(at, "the name of a transition, or a map with its numbers");
  if (!name) return std::nullopt;
  const auto& lines = built_in_catalogue();
  if (!lines) {
    reader.fault(at, "found no catalogue of transitions that can be read, expected the one of this program: " +
                         lines.error().message);
    return std::nullopt;
  }
  return keep(reader, at, atom::resolve(*name, *lines));
}

}  // namespace halfturn::config
