// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <utility>

#include "model/atom/angular.hpp"
#include "model/atom/dipole.hpp"
#include "model/atom/selection.hpp"
#include "model/atom/transition.hpp"
#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"

namespace halfturn::atom {
namespace {

using constants::kSpeedOfLight;
using constants::kTwoPi;

// 1e-4: air shortens a wavelength by 2.7e-4 to 3.3e-4 between 0.2 and 2 um (Peck & Reeder 1972), and five digits of a
// wavelength are good to 1e-5.
constexpr double kWavelengthAgreement = 1e-4;
// 1 %: the slips worth catching are larger (partial for total width of Ca+ 397 nm moves the moment by 3.4 %, Racah's
// normalisation by 41 %), and three printed digits stay below.
constexpr double kStrengthAgreement = 0.01;

const std::string kWhere = "transition";

bool agree(double a, double b, double relative) { return std::abs(a - b) <= relative * std::abs(b); }

Result<void> check_positive(const std::optional<double>& value, const std::string& field) {
  if (!value || (std::isfinite(*value) && *value > 0.0)) return {};
  return fault("bad_value", kWhere + "." + field, "found " + plain(*value) + ", expected a finite number above 0");
}

Result<void> check_numbers(const InlineTransition& given) {
  const std::pair<const std::optional<double>*, const char*> positive[] = {
      {&given.wavelength_m, "wavelength_m"},
      {&given.frequency_hz, "frequency_hz"},
      {&given.linewidth_hz, "linewidth_hz"},
      {&given.lifetime_s, "lifetime_s"},
      {&given.branching, "branching"},
      {&given.moment_C_m, "moment_C_m"},
      {&given.magnetic_moment_J_T, "magnetic_moment_J_T"}};
  for (const auto& [value, field] : positive) {
    if (auto checked = check_positive(*value, field); !checked) return checked;
  }
  if (given.branching && *given.branching > 1.0) {
    return fault("bad_value", kWhere + ".branching",
                 "found " + plain(*given.branching) + ", expected a fraction of at most 1");
  }
  if (given.angular_factor && (!std::isfinite(*given.angular_factor) || *given.angular_factor == 0.0)) {
    return fault("bad_value", kWhere + ".angular_factor",
                 "found " + plain(*given.angular_factor) + ", expected the matrix element over <J||er||J'>, which is not 0");
  }
  return {};
}

Result<void> set_frequency(const InlineTransition& given, Transition& made) {
  if (!given.wavelength_m && !given.frequency_hz) {
    return fault("missing_field", kWhere, "neither a vacuum wavelength nor a frequency is given; one of them is needed");
  }
  made.frequency_hz = given.frequency_hz ? *given.frequency_hz : kSpeedOfLight / *given.wavelength_m;
  made.wavelength_m = kSpeedOfLight / made.frequency_hz;
  if (!given.wavelength_m || agree(*given.wavelength_m, made.wavelength_m, kWavelengthAgreement)) return {};
  const double index = made.wavelength_m / *given.wavelength_m;
  return fault(
      "bad_value", kWhere + ".wavelength_m",
      "found " + plain(*given.wavelength_m * 1e9, 7) + " nm, but c over the stated frequency is " +
          plain(made.wavelength_m * 1e9, 7) + " nm" +
          (index > 1.00025 && index < 1.00034 ? "; that is the wavelength in air, and the one in vacuum is needed" : ""));
}

Result<void> set_linewidth(const InlineTransition& given, Transition& made) {
  made.linewidth_hz = given.linewidth_hz;
  if (!given.lifetime_s) return {};
  const double from_lifetime = 1.0 / (kTwoPi * *given.lifetime_s);
  if (given.linewidth_hz && !agree(*given.linewidth_hz, from_lifetime, kStrengthAgreement)) {
    const bool is_angular = agree(*given.linewidth_hz, kTwoPi * from_lifetime, kStrengthAgreement);
    return fault("bad_value", kWhere + ".linewidth_hz",
                 "found " + engineering(*given.linewidth_hz, "Hz") + ", but the stated lifetime gives " +
                     engineering(from_lifetime, "Hz") + " (1 / (2 pi lifetime), total over all decays)" +
                     (is_angular ? "; that looks like the angular rate, 2 pi larger" : ""));
  }
  made.linewidth_hz = from_lifetime;
  return {};
}

Result<void> set_levels(const InlineTransition& given, Transition& made) {
  made.twice_I = given.twice_I;
  made.polarisation = given.polarisation;
  if (given.lower) made.lower = *given.lower;
  if (given.upper) made.upper = *given.upper;
  if (given.lower) {
    if (auto checked = check_level(made.lower, made.twice_I, "", kWhere + ".lower"); !checked) return checked;
  }
  if (given.upper) {
    if (auto checked = check_level(made.upper, made.twice_I, "'", kWhere + ".upper"); !checked) return checked;
  }
  if (made.polarisation || !made.lower.twice_m || !made.upper.twice_m) return {};
  const int change = *made.upper.twice_m - *made.lower.twice_m;
  if (change % 2 == 0 && std::abs(change) <= 2) made.polarisation = static_cast<Polarisation>(change / 2);
  return {};
}

bool has_states(const InlineTransition& given) {
  const auto complete = [&](const std::optional<Level>& level) {
    return level && level->twice_m && (given.twice_I == 0 || level->twice_F);
  };
  return complete(given.lower) && complete(given.upper);
}

double factor_of_states(const Transition& made) {
  return hyperfine_factor(made.twice_I, made.lower.twice_J, made.lower.twice_F.value_or(made.lower.twice_J),
                          *made.lower.twice_m, made.upper.twice_J, made.upper.twice_F.value_or(made.upper.twice_J),
                          *made.upper.twice_m);
}

/// What the states or the stated factor say of the angular part.
Result<void> set_angular_factor(const InlineTransition& given, Transition& made) {
  if (!given.lower || !given.upper) return {};
  if (has_states(given)) made.angular_factor = factor_of_states(made);
  if (!given.angular_factor) return {};
  if (made.angular_factor && !agree(std::abs(*given.angular_factor), std::abs(*made.angular_factor), kStrengthAgreement)) {
    return fault("bad_value", kWhere + ".angular_factor",
                 "found " + plain(*given.angular_factor) + ", but the stated states give " + plain(*made.angular_factor) +
                     " times <J||er||J'>");
  }
  if (!made.angular_factor) made.angular_factor = given.angular_factor;
  const double weight = (made.upper.twice_J + 1.0) / (made.lower.twice_J + 1.0);
  const double fraction = *made.angular_factor * *made.angular_factor * weight;
  if (fraction <= 1.0 + kStrengthAgreement) return {};
  return fault("bad_value", kWhere + ".angular_factor",
               "found " + plain(*given.angular_factor) + ", but between J = " + half_text(made.lower.twice_J) +
                   " and J' = " + half_text(made.upper.twice_J) + " it is at most " + plain(1.0 / std::sqrt(weight)) +
                   " (the matrix element over <J||er||J'> in Steck's normalisation)");
}

Result<void> check_sufficient(const InlineTransition& given, const Transition& made) {
  if (!made.linewidth_hz) {
    return fault("missing_field", kWhere, "no linewidth, lifetime or moment is given; the dipole moment needs one of them");
  }
  if (!given.lower || !given.upper) {
    return fault("missing_field", kWhere,
                 "a dipole moment from a linewidth needs both levels (their J), or state the moment itself");
  }
  if (!made.angular_factor) {
    return fault("missing_field", kWhere,
                 "a dipole moment from a linewidth needs the states (m and m', F and F' where the nucleus has "
                 "spin) or the angular factor, or state the moment itself");
  }
  return {};
}

void set_strengths(const InlineTransition& given, Transition& made) {
  if (!made.linewidth_hz) return;
  made.partial_linewidth_hz = given.branching.value_or(1.0) * *made.linewidth_hz;
  if (!given.branching) made.assumed.push_back("the upper level decays to the lower level alone");
  if (made.multipole != Multipole::electric_dipole || !given.lower || !given.upper) return;
  made.reduced_dipole_C_m =
      reduced_dipole_C_m(made.frequency_hz, *made.partial_linewidth_hz, made.lower.twice_J, made.upper.twice_J);
}

Result<void> dipole_from_linewidth(const InlineTransition& given, Transition& made) {
  if (given.lower && given.upper) {
    auto allowed = check_dipole(made.multipole, made.lower, made.upper, made.twice_I, made.polarisation, kWhere);
    if (!allowed) return allowed;
  }
  if (auto sufficient = check_sufficient(given, made); !sufficient) return sufficient;
  made.dipole_C_m = std::abs(*made.angular_factor) * *made.reduced_dipole_C_m;
  made.state_linewidth_hz = two_level_linewidth_hz(made.frequency_hz, *made.dipole_C_m);
  return {};
}

std::string in_atomic_units(double moment_C_m) { return plain(moment_C_m / constants::kDipoleAtomicUnit) + " e a0"; }

/// A stated moment stands, unless the stated linewidth, branching and states say another.
Result<void> dipole_as_stated(const InlineTransition& given, Transition& made) {
  made.dipole_C_m = given.moment_C_m;
  if (made.multipole != Multipole::electric_dipole) return {};
  made.state_linewidth_hz = two_level_linewidth_hz(made.frequency_hz, *given.moment_C_m);
  if (!made.linewidth_hz) return {};
  if (*made.state_linewidth_hz > (1.0 + kStrengthAgreement) * *made.linewidth_hz) {
    return fault("bad_value", kWhere + ".moment_C_m",
                 "found " + in_atomic_units(*given.moment_C_m) + ", which by itself decays with " +
                     engineering(*made.state_linewidth_hz, "Hz") + ", more than the stated linewidth of " +
                     engineering(*made.linewidth_hz, "Hz") +
                     "; the matrix element of the addressed states is wanted, not a reduced one");
  }
  if (!given.branching || !made.angular_factor || !made.reduced_dipole_C_m || *made.angular_factor == 0.0) return {};
  const double expected = std::abs(*made.angular_factor) * *made.reduced_dipole_C_m;
  if (agree(*given.moment_C_m, expected, kStrengthAgreement)) return {};
  return fault("bad_value", kWhere + ".moment_C_m",
               "found " + in_atomic_units(*given.moment_C_m) + ", but the stated linewidth, branching and states give " +
                   in_atomic_units(expected));
}

}  // namespace

Result<Transition> inline_transition(const InlineTransition& given) {
  Transition made;
  made.name = given.name;
  made.multipole = given.multipole;
  made.magnetic_moment_J_T = given.magnetic_moment_J_T;
  if (auto checked = check_numbers(given); !checked) return tl::unexpected(checked.error());
  if (auto set = set_frequency(given, made); !set) return tl::unexpected(set.error());
  if (auto set = set_linewidth(given, made); !set) return tl::unexpected(set.error());
  if (auto set = set_levels(given, made); !set) return tl::unexpected(set.error());
  set_strengths(given, made);
  if (made.multipole == Multipole::electric_dipole) {
    if (auto set = set_angular_factor(given, made); !set) return tl::unexpected(set.error());
    auto dipole = given.moment_C_m ? dipole_as_stated(given, made) : dipole_from_linewidth(given, made);
    if (!dipole) return tl::unexpected(dipole.error());
  } else if (given.moment_C_m) {
    if (auto dipole = dipole_as_stated(given, made); !dipole) return tl::unexpected(dipole.error());
  }
  return made;
}

}  // namespace halfturn::atom
