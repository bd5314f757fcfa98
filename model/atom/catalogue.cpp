// SPDX-License-Identifier: Apache-2.0
#include "model/atom/catalogue.hpp"

#include <algorithm>
#include <cmath>

#include "model/atom/angular.hpp"
#include "model/atom/dipole.hpp"
#include "model/atom/selection.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::atom {
namespace {

const std::string kWhere = "transition";
constexpr double kElectronG = 2.00231930436092;  // CODATA 2022, absolute value

bool is_dipole(Multipole kind) { return kind == Multipole::electric_dipole || kind == Multipole::magnetic_dipole; }

bool has_states(const Transition& made) {
  const bool has_f = made.twice_I == 0 || (made.lower.twice_F && made.upper.twice_F);
  return has_f && made.lower.twice_m && made.upper.twice_m;
}

void add_source(Transition& made, const std::optional<Quoted>& number) {
  if (!number) return;
  made.status = std::max(made.status, number->status);
  if (std::find(made.sources.begin(), made.sources.end(), number->source) == made.sources.end()) {
    made.sources.push_back(number->source);
  }
}

Transition transition_of(const CatalogueLine& line, const LineNumbers& numbers, const Level& lower, const Level& upper,
                         std::string name) {
  Transition made;
  made.name = std::move(name);
  made.multipole = line.kind;
  made.frequency_hz = numbers.frequency_hz.value;
  made.wavelength_m = constants::kSpeedOfLight / made.frequency_hz;
  if (numbers.linewidth_hz) made.linewidth_hz = numbers.linewidth_hz->value;
  if (numbers.partial_linewidth_hz) made.partial_linewidth_hz = numbers.partial_linewidth_hz->value;
  if (numbers.reduced_dipole_C_m) made.reduced_dipole_C_m = numbers.reduced_dipole_C_m->value;
  made.twice_I = line.twice_I;
  made.lower = line.lower;
  made.upper = line.upper;
  made.lower.twice_F = lower.twice_F, made.lower.twice_m = lower.twice_m;
  made.upper.twice_F = upper.twice_F, made.upper.twice_m = upper.twice_m;
  add_source(made, numbers.frequency_hz);
  add_source(made, numbers.linewidth_hz);
  add_source(made, numbers.partial_linewidth_hz);
  return made;
}

Result<void> check_complete(const Transition& made) {
  const auto missing = [&](const Level& level, const std::string& prime) -> std::string {
    if (made.twice_I != 0 && !level.twice_F) return "F" + prime;
    return level.twice_m ? "" : "m" + prime;
  };
  std::string what = missing(made.lower, "");
  if (what.empty()) what = missing(made.upper, "'");
  if (what.empty()) return {};
  return fault("missing_field", kWhere, "'" + made.name + "' does not say " + what + ", which its dipole moment needs");
}

/// The angular part between the addressed states; they are complete.
double factor_of_states(const Transition& made) {
  const Level &lower = made.lower, &upper = made.upper;
  return hyperfine_factor(made.twice_I, lower.twice_J, lower.twice_F.value_or(lower.twice_J), *lower.twice_m, upper.twice_J,
                          upper.twice_F.value_or(upper.twice_J), *upper.twice_m);
}

/// The moment within one S1/2 level: g_J mu_B sqrt(J(J+1)) times the angular part, for the electron's spin alone. g_J of the
/// alkalis is the electron's to 1.1e-4, and their nuclei add less than 6e-4 (Arimondo, Inguscio & Violino, Rev. Mod. Phys.
/// 49, 31 (1977), tables of g factors; from memory).
void set_magnetic_moment(Transition& made) {
  if (made.lower.term != made.upper.term || made.lower.term.find('S') == std::string::npos || made.lower.twice_J != 1)
    return;
  made.angular_factor = factor_of_states(made);
  made.magnetic_moment_J_T = kElectronG * constants::kBohrMagneton * std::sqrt(0.75) * std::abs(*made.angular_factor);
  made.assumed.push_back("the moment is that of the electron's spin alone, good to 1e-3");
}

/// Fills what the addressed states of an electric-dipole line add.
void set_states(const LineNumbers& numbers, Transition& made) {
  made.angular_factor = factor_of_states(made);
  if (!numbers.reduced_dipole_C_m) return;
  const double size = std::abs(*made.angular_factor);
  made.dipole_C_m = size * numbers.reduced_dipole_C_m->value;
  if (numbers.reduced_dipole_C_m->sigma > 0.0) made.dipole_sigma_C_m = size * numbers.reduced_dipole_C_m->sigma;
  made.state_linewidth_hz = two_level_linewidth_hz(made.frequency_hz, *made.dipole_C_m);
}

Result<void> check_name(const std::string& name) {
  if (!name.empty() && name.find_first_of(",:#\t\n\"") == std::string::npos && name.find("  ") == std::string::npos &&
      name.front() != ' ' && name.back() != ' ') {
    return {};
  }
  return fault("bad_value", "transitions",
               "found the name '" + name +
                   "', expected words parted by single blanks, without comma, colon, "
                   "hash or double quote");
}

Result<void> check_names(const CatalogueLine& line) {
  std::vector<std::string> all = line.labels;
  all.insert(all.end(), line.recommended.begin(), line.recommended.end());
  all.insert(all.end(), {line.species, line.lower.term, line.upper.term});
  for (const auto& name : all) {
    if (auto checked = check_name(name); !checked) return checked;
  }
  return {};
}

Result<void> check_levels(const CatalogueLine& line) {
  for (const auto& [level, field] : {std::pair{&line.lower, "lower"}, std::pair{&line.upper, "upper"}}) {
    if (level->twice_J < 0 || level->twice_J > 12 || line.twice_I < 0 || line.twice_I > 12) {
      return fault("bad_value", std::string("transitions.") + field,
                   line.species + ": J and the nuclear spin must lie between 0 and 6");
    }
    if (level->parity && std::abs(*level->parity) == 1) continue;
    return fault("missing_field", std::string("transitions.") + field,
                 line.species + " " + level->term + ": a level needs its parity");
  }
  if (!is_dipole(line.kind)) return {};
  return check_dipole(line.kind, line.lower, line.upper, line.twice_I, std::nullopt, "transitions");
}

}  // namespace

Result<Transition> make_transition(const CatalogueLine& line, const Level& lower, const Level& upper,
                                   std::optional<Polarisation> polarisation, std::string name) {
  const auto numbers = numbers_of(line);
  if (!numbers) return tl::unexpected(numbers.error());
  Transition made = transition_of(line, *numbers, lower, upper, std::move(name));
  made.polarisation = polarisation;
  if (auto checked = check_level(made.lower, made.twice_I, "", kWhere); !checked) return tl::unexpected(checked.error());
  if (auto checked = check_level(made.upper, made.twice_I, "'", kWhere); !checked) return tl::unexpected(checked.error());
  if (!is_dipole(made.multipole)) return made;
  const bool is_electric = made.multipole == Multipole::electric_dipole;
  if (auto complete = check_complete(made); is_electric && !complete) return tl::unexpected(complete.error());
  auto allowed = check_dipole(made.multipole, made.lower, made.upper, made.twice_I, polarisation, kWhere);
  if (!allowed) return tl::unexpected(allowed.error());
  if (!has_states(made)) return made;
  if (!made.polarisation) made.polarisation = static_cast<Polarisation>((*upper.twice_m - *lower.twice_m) / 2);
  if (is_electric) {
    set_states(*numbers, made);
  } else {
    set_magnetic_moment(made);
  }
  return made;
}

Result<void> check_line(const CatalogueLine& line) {
  if (auto checked = check_names(line); !checked) return checked;
  if (auto checked = check_levels(line); !checked) return checked;
  if (auto checked = check_consistency(line); !checked) return checked;
  if (line.recommended.empty())
    return fault("missing_field", "transitions.recommended", line.species + ": a line needs a full name to list");
  for (const auto& name : line.recommended) {
    if (auto made = resolve(name, std::span(&line, 1)); !made) return tl::unexpected(made.error());
  }
  return {};
}

std::vector<std::string> names(std::span<const CatalogueLine> lines) {
  std::vector<std::string> all;
  for (const auto& line : lines) all.insert(all.end(), line.recommended.begin(), line.recommended.end());
  return all;
}

Result<int> read_parity(std::string_view text, const std::string& where) {
  if (text == "even") return 1;
  if (text == "odd") return -1;
  return fault("bad_value", where, "found '" + std::string(text) + "', expected even or odd");
}

}  // namespace halfturn::atom
