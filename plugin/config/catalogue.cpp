// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/catalogue.hpp"

#include "plugin/config/atoms.hpp"
#include "plugin/embedded.hpp"

namespace halfturn::config {
namespace {

using std::string_view;

constexpr int kLargest = 40;  // doubled
constexpr string_view kTop[] = {"format", "lines"};
constexpr string_view kLine[] = {"species",
                                 "labels",
                                 "twice_I",
                                 "kind",
                                 "lower",
                                 "upper",
                                 "wavelength_m",
                                 "frequency_hz",
                                 "lifetime_s",
                                 "linewidth_hz",
                                 "branching",
                                 "partial_linewidth_hz",
                                 "partial_rate_per_s",
                                 "reduced_dipole_ea0",
                                 "saturation_w_m2",
                                 "recommended",
                                 "note"};
constexpr string_view kLevel[] = {"term", "twice_J", "twice_S", "parity"};
constexpr string_view kQuoted[] = {"value", "sigma", "source", "status", "computed"};
constexpr string_view kStatus[] = {"read", "quoted", "recalled"};  // in the order of atom::Status

std::optional<int> small(Reader& reader, const Place& at) {
  const auto value = reader.integer(at, 0, kLargest);
  return value ? std::optional(static_cast<int>(*value)) : std::nullopt;
}

atom::Level read_level(Reader& reader, const Place& at) {
  atom::Level level;
  if (!at || !reader.map(at, {kLevel})) return level;
  level.term = reader.text(reader.need(at, "term", "a term"), "a term such as 5S1/2").value_or("");
  level.twice_J = small(reader, reader.need(at, "twice_J", "twice J")).value_or(0);
  level.twice_S = small(reader, at["twice_S"]);
  level.parity = read_parity(reader, at["parity"]);
  return level;
}

std::optional<atom::Quoted> read_quoted(Reader& reader, const Place& at) {
  if (!at || !reader.map(at, {kQuoted})) return std::nullopt;
  atom::Quoted out;
  out.value = reader.quantity(reader.need(at, "value", "a number"), Dimension::number).value_or(0.0);
  out.sigma =
      reader.quantity(reader.need(at, "sigma", "one standard deviation"), Dimension::number, kNotNegative).value_or(0.0);
  out.source =
      reader.text(reader.need(at, "source", "where the number was found"), "where the number was found").value_or("");
  if (const auto status = reader.choice(reader.need(at, "status", listed(kStatus)), kStatus))
    out.status = static_cast<atom::Status>(*status);
  out.computed = reader.flag(at["computed"]).value_or(false);
  return out;
}

std::vector<std::string> read_texts(Reader& reader, const Place& at, string_view expected) {
  std::vector<std::string> out;
  if (!at || !reader.list(at, expected)) return out;
  for (const Node& child : at.node->children) out.push_back(reader.text(at.child(child), "a text").value_or(""));
  return out;
}

atom::CatalogueLine read_line(Reader& reader, const Place& at) {
  atom::CatalogueLine line;
  if (!reader.map(at, {kLine})) return line;
  line.species = reader.text(reader.need(at, "species", "a species such as Rb87"), "a species such as Rb87").value_or("");
  line.labels = read_texts(reader, at["labels"], "a list of labels such as [D2]");
  line.twice_I = small(reader, at["twice_I"]).value_or(0);
  line.kind = read_multipole(reader, reader.need(at, "kind", "a kind such as electric_dipole")).value_or(line.kind);
  line.lower = read_level(reader, reader.need(at, "lower", "the lower level"));
  line.upper = read_level(reader, reader.need(at, "upper", "the upper level"));
  using Number = std::optional<atom::Quoted> atom::CatalogueLine::*;
  constexpr std::pair<string_view, Number> kNumbers[] = {
      {"wavelength_m", &atom::CatalogueLine::wavelength_m},
      {"frequency_hz", &atom::CatalogueLine::frequency_hz},
      {"lifetime_s", &atom::CatalogueLine::lifetime_s},
      {"linewidth_hz", &atom::CatalogueLine::linewidth_hz},
      {"branching", &atom::CatalogueLine::branching},
      {"partial_linewidth_hz", &atom::CatalogueLine::partial_linewidth_hz},
      {"partial_rate_per_s", &atom::CatalogueLine::partial_rate_per_s},
      {"reduced_dipole_ea0", &atom::CatalogueLine::reduced_dipole_ea0},
      {"saturation_w_m2", &atom::CatalogueLine::saturation_w_m2}};
  for (const auto& [key, number] : kNumbers) line.*number = read_quoted(reader, at[key]);
  line.recommended = read_texts(reader, at["recommended"], "a list of transitions");
  line.note = reader.text(at["note"], "a text").value_or("");
  return line;
}

std::string all(const std::vector<Diagnosis>& faults) {
  std::string out;
  for (const Diagnosis& one : faults) out += (out.empty() ? "" : "\n") + to_text(one, "catalogue");
  return out;
}

}  // namespace

Result<std::vector<atom::CatalogueLine>> read_catalogue(const std::string& text) {
  const Document document = read_document(text);
  Reader reader;
  reader.faults = document.faults;
  std::vector<atom::CatalogueLine> lines;
  const Place top{&document.root, ""};
  if (document.complete && reader.map(top, {kTop})) {
    reader.integer(reader.need(top, "format", "format: 1"), 1, 1);
    const Place list = reader.need(top, "lines", "a list of lines");
    if (reader.list(list, "a list of lines"))
      for (const Node& child : list.node->children) {
        const std::size_t before = reader.faults.size();
        lines.push_back(read_line(reader, list.child(child)));
        if (reader.faults.size() > before) continue;
        if (const auto sound = atom::check_line(lines.back()); !sound)
          reader.fault(list.child(child), sound.error().message);
      }
  }
  if (!reader.faults.empty()) return fault("bad_value", "catalogue", all(reader.faults));
  return lines;
}

const Result<std::vector<atom::CatalogueLine>>& built_in_catalogue() {
  static const auto catalogue = read_catalogue(std::string(embedded::file("transitions.yaml")));
  return catalogue;
}

}  // namespace halfturn::config
