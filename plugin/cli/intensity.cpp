// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/intensity.hpp"

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>
#include <string_view>
#include <vector>

#include "model/atom/light.hpp"
#include "model/quantity/format.hpp"
#include "plugin/cli/layout.hpp"
#include "plugin/config/catalogue.hpp"

namespace halfturn::cli {

namespace {

using Catalogue = std::vector<atom::CatalogueLine>;

std::string details(const atom::Transition& transition) {
  std::string text = plain(1e9 * transition.wavelength_m, 7) + " nm, ";
  text += atom::name_of(transition.multipole);
  if (transition.linewidth_hz) text += ", natural width " + engineering(*transition.linewidth_hz, "Hz", 4);
  if (!transition.dipole_C_m) text += ", no dipole moment";
  return text;
}

Exit list(const Catalogue& catalogue, Streams& streams) {
  for (const auto& name : atom::names(catalogue)) {
    const auto transition = atom::resolve(name, catalogue);
    if (!transition) return print_fault(streams.err, name, transition.error()), kFailed;
    streams.out << name << "  " << details(*transition) << '\n';
  }
  return kDone;
}

Result<atom::LightReport> light(const IntensityOptions& options, const atom::Transition& transition) {
  const int given = options.rabi_hz.has_value() + options.intensity_w_m2.has_value() + options.power_w.has_value();
  if (given != 1)
    return fault("bad_value", "", "give exactly one of --rabi-hz, --intensity-w-m2 and --power-w; the others follow from it");
  if (options.rabi_hz) return atom::light_from_rabi_hz(transition, *options.rabi_hz, options.waist_m);
  if (options.intensity_w_m2) return atom::light_from_intensity_w_m2(transition, *options.intensity_w_m2, options.waist_m);
  if (!options.waist_m) return fault("missing_field", "", "--power-w needs --waist-m, the 1/e\u00b2 radius of the beam");
  return atom::light_from_power_w(transition, *options.power_w, *options.waist_m);
}

nlohmann::ordered_json number(const std::optional<double>& value) {
  return value && std::isfinite(*value) ? nlohmann::ordered_json(*value) : nlohmann::ordered_json(nullptr);
}

void print_json(const atom::Transition& transition, const atom::LightReport& light, Streams& streams) {
  nlohmann::ordered_json object = {
      {"transition", transition.name},
      {"wavelength_m", number(transition.wavelength_m)},
      {"linewidth_hz", number(transition.linewidth_hz)},
      {"dipole_c_m", number(light.dipole_c_m)},
      {"dipole_ea0", number(light.dipole_ea0)},
      {"rabi_hz", number(light.rabi_hz)},
      {"pi_time_s", number(light.pi_time_s)},
      {"field_v_m", number(light.field_v_m)},
      {"intensity_w_m2", number(light.intensity_w_m2)},
      {"saturation", number(light.saturation)},
      {"saturation_intensity_w_m2", number(light.saturation_intensity_w_m2)},
  };
  if (light.power_w) object["power_w"] = number(light.power_w);
  object["bloch_siegert_hz"] = number(light.bloch_siegert_hz);
  object["assumed"] = transition.assumed;
  object["sources"] = transition.sources;
  streams.out << object.dump() << '\n';
}

void print(const atom::Transition& transition, const atom::LightReport& light, Streams& streams) {
  std::vector<std::vector<std::string>> rows = {
      {"Rabi frequency", engineering(light.rabi_hz, "Hz", 6), "pi pulse of " + engineering(light.pi_time_s, "s", 6)},
      {"intensity", engineering(light.intensity_w_m2, "W/m\u00b2", 6), "a travelling wave in vacuum"},
      {"field", engineering(light.field_v_m, "V/m", 6), "peak amplitude"}};
  if (light.power_w) rows.push_back({"power", engineering(*light.power_w, "W", 6), "the atoms at the centre of the beam"});
  if (light.saturation)
    rows.push_back({"saturation", plain(*light.saturation, 6), "Isat = " + engineering(*light.saturation_intensity_w_m2, "W/m\u00b2")});
  rows.push_back({"dipole moment", plain(light.dipole_ea0, 6) + " e a0", "of the addressed states, " + plain(light.dipole_c_m) + " C m"});
  rows.push_back({"Bloch-Siegert", engineering(light.bloch_siegert_hz, "Hz", 3), "shift of the line"});
  streams.out << streams.style.strong(transition.name) << ", " << details(transition) << "\n\n" << table(rows, "  ");
  for (const auto& assumed : transition.assumed) streams.out << wrapped(assumed, "  assumed: ");
  for (const auto& source : sources_once(transition.sources)) streams.out << wrapped(source, "  source: ");
}

}  // namespace

std::vector<std::string> sources_once(const std::vector<std::string>& given) {
  std::vector<std::string> sources;
  for (std::string_view rest : given) {
    while (!rest.empty()) {
      const auto end = std::min(rest.find("; "), rest.size());
      const std::string source(rest.substr(0, end));
      if (std::find(sources.begin(), sources.end(), source) == sources.end()) sources.push_back(source);
      rest.remove_prefix(std::min(end + 2, rest.size()));
    }
  }
  const auto tells_more = [](const std::string& source, const std::string& base) { return source.starts_with(base + ", "); };
  std::vector<std::string> once;
  for (const auto& base : sources) {
    if (std::any_of(sources.begin(), sources.end(), [&](const auto& other) { return tells_more(base, other); })) continue;
    std::string details;
    for (const auto& source : sources)
      if (tells_more(source, base)) details += (details.empty() ? ": " : "; ") + source.substr(base.size() + 2);
    once.push_back(base + details);
  }
  return once;
}

Exit intensity(const IntensityOptions& options, Streams& streams) {
  const auto& catalogue = config::built_in_catalogue();
  if (!catalogue) return print_fault(streams.err, "the built-in catalogue", catalogue.error()), kFailed;
  if (options.list) return list(*catalogue, streams);
  if (options.transition.empty()) {
    print_fault(streams.err, "", {"missing_field", "", "give --transition NAME; `halfturn intensity --list` shows the names"});
    return kBadInput;
  }
  const auto transition = atom::resolve(options.transition, *catalogue);
  if (!transition) return print_fault(streams.err, "", transition.error()), kBadInput;
  const auto found = light(options, *transition);
  if (!found) return print_fault(streams.err, "", found.error()), kBadInput;
  if (options.json)
    print_json(*transition, *found, streams);
  else
    print(*transition, *found, streams);
  return kDone;
}

}  // namespace halfturn::cli
