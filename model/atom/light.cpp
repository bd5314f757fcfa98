// SPDX-License-Identifier: Apache-2.0
#include "model/atom/light.hpp"

#include <algorithm>
#include <cmath>
#include <string>

#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"

namespace halfturn::atom {
namespace {

using namespace constants;

std::string named(const Transition& transition) {
  return transition.name.empty() ? "the transition" : "'" + transition.name + "'";
}

std::string kind_of(const Transition& transition) {
  std::string words(name_of(transition.multipole));
  std::replace(words.begin(), words.end(), '_', ' ');
  return words;
}

Result<void> check_positive(double value, const std::string& field) {
  if (std::isfinite(value) && value > 0.0) return {};
  return fault("bad_value", field, "found " + plain(value) + ", expected a finite number above 0");
}

Result<double> dipole_of(const Transition& transition) {
  if (transition.dipole_C_m) return *transition.dipole_C_m;
  return fault("not_available", "transition",
               named(transition) + " is of kind " + kind_of(transition) +
                   " and states no dipole moment, so its Rabi frequency says nothing about intensity; "
                   "state its moment to have one");
}

Result<double> linewidth_of(const Transition& transition) {
  if (transition.linewidth_hz) return *transition.linewidth_hz;
  return fault("not_available", "transition", named(transition) + " states no linewidth, so it has no saturation intensity");
}

LightReport report_of(const Transition& transition, double rabi_hz, double dipole_C_m, std::optional<double> waist_m) {
  LightReport report;
  report.rabi_hz = rabi_hz;
  report.pi_time_s = 0.5 / rabi_hz;
  report.field_v_m = field_v_m(rabi_hz, dipole_C_m);
  report.intensity_w_m2 = intensity_w_m2(report.field_v_m);
  if (transition.linewidth_hz) {
    report.saturation = 2.0 * std::pow(rabi_hz / *transition.linewidth_hz, 2);
    report.saturation_intensity_w_m2 = report.intensity_w_m2 / *report.saturation;
  }
  if (waist_m) report.power_w = power_of_intensity_w(report.intensity_w_m2, *waist_m);
  report.bloch_siegert_hz = bloch_siegert_hz(rabi_hz, transition.frequency_hz);
  report.rabi_over_carrier = rabi_hz / transition.frequency_hz;
  report.dipole_c_m = dipole_C_m;
  report.dipole_ea0 = dipole_C_m / kDipoleAtomicUnit;
  return report;
}

/// The report after `given` was checked, by way of the Rabi frequency that `to_rabi_hz` makes of it and the moment.
template <class ToRabi>
Result<LightReport> light_from(const Transition& transition, double given, const std::string& field,
                               std::optional<double> waist_m, ToRabi to_rabi_hz) {
  const auto dipole_C_m = dipole_of(transition);
  if (!dipole_C_m) return tl::unexpected(dipole_C_m.error());
  if (auto checked = check_positive(given, field); !checked) return tl::unexpected(checked.error());
  if (waist_m) {
    if (auto checked = check_positive(*waist_m, "waist_m"); !checked) return tl::unexpected(checked.error());
  }
  return report_of(transition, to_rabi_hz(*dipole_C_m), *dipole_C_m, waist_m);
}

}  // namespace

double field_v_m(double rabi_hz, double dipole_C_m) { return kPlanck * rabi_hz / dipole_C_m; }

double rabi_hz_of_field(double field_v_m, double dipole_C_m) { return dipole_C_m * field_v_m / kPlanck; }

double intensity_w_m2(double field_v_m) { return 0.5 * kSpeedOfLight * kVacuumPermittivity * field_v_m * field_v_m; }

double field_of_intensity_v_m(double intensity_w_m2) {
  return std::sqrt(2.0 * intensity_w_m2 / (kSpeedOfLight * kVacuumPermittivity));
}

double peak_intensity_w_m2(double power_w, double waist_m) { return 2.0 * power_w / (kPi * waist_m * waist_m); }

double power_of_intensity_w(double intensity_w_m2, double waist_m) { return 0.5 * kPi * waist_m * waist_m * intensity_w_m2; }

double flux_density_t(double rabi_hz, double magnetic_moment_J_T) { return kPlanck * rabi_hz / magnetic_moment_J_T; }

double rabi_hz_of_flux_density(double flux_density_t, double magnetic_moment_J_T) {
  return magnetic_moment_J_T * flux_density_t / kPlanck;
}

double bloch_siegert_hz(double rabi_hz, double carrier_hz) { return 0.25 * rabi_hz * rabi_hz / carrier_hz; }

Result<double> saturation_intensity(const Transition& transition) {
  const auto dipole_C_m = dipole_of(transition);
  if (!dipole_C_m) return dipole_C_m;
  const auto linewidth_hz = linewidth_of(transition);
  if (!linewidth_hz) return linewidth_hz;
  const double energy_rate = kPlanck * *linewidth_hz;  // hbar Gamma
  return kSpeedOfLight * kVacuumPermittivity * energy_rate * energy_rate / (4.0 * *dipole_C_m * *dipole_C_m);
}

Result<double> two_level_saturation_intensity(const Transition& transition) {
  const auto linewidth_hz = linewidth_of(transition);
  if (!linewidth_hz) return linewidth_hz;
  if (!transition.partial_linewidth_hz) {
    return fault("not_available", "transition", named(transition) + " states no decay to its lower level");
  }
  const double total = kTwoPi * *linewidth_hz;
  const double wavelength = transition.wavelength_m;
  return kPi * kPlanck * kSpeedOfLight * total * (*linewidth_hz / *transition.partial_linewidth_hz) /
         (3.0 * wavelength * wavelength * wavelength);
}

Result<LightReport> light_from_rabi_hz(const Transition& transition, double rabi_hz, std::optional<double> waist_m) {
  return light_from(transition, rabi_hz, "rabi_hz", waist_m, [&](double) { return rabi_hz; });
}

Result<LightReport> light_from_pi_time_s(const Transition& transition, double pi_time_s, std::optional<double> waist_m) {
  return light_from(transition, pi_time_s, "pi_time_s", waist_m, [&](double) { return 0.5 / pi_time_s; });
}

Result<LightReport> light_from_field_v_m(const Transition& transition, double field, std::optional<double> waist_m) {
  return light_from(transition, field, "field_v_m", waist_m,
                    [&](double dipole_C_m) { return rabi_hz_of_field(field, dipole_C_m); });
}

Result<LightReport> light_from_intensity_w_m2(const Transition& transition, double intensity,
                                              std::optional<double> waist_m) {
  return light_from(transition, intensity, "intensity_w_m2", waist_m,
                    [&](double dipole_C_m) { return rabi_hz_of_field(field_of_intensity_v_m(intensity), dipole_C_m); });
}

Result<LightReport> light_from_saturation(const Transition& transition, double saturation, std::optional<double> waist_m) {
  const auto linewidth_hz = linewidth_of(transition);
  if (!linewidth_hz) return tl::unexpected(linewidth_hz.error());
  return light_from(transition, saturation, "saturation", waist_m,
                    [&](double) { return *linewidth_hz * std::sqrt(0.5 * saturation); });
}

Result<LightReport> light_from_power_w(const Transition& transition, double power_w, double waist_m) {
  return light_from(transition, power_w, "power_w", waist_m, [&](double dipole_C_m) {
    return rabi_hz_of_field(field_of_intensity_v_m(peak_intensity_w_m2(power_w, waist_m)), dipole_C_m);
  });
}

Result<FluxReport> flux_from_rabi_hz(const Transition& transition, double rabi_hz) {
  if (!transition.magnetic_moment_J_T) {
    return fault("not_available", "transition",
                 named(transition) +
                     " states no magnetic moment, so its Rabi frequency says nothing "
                     "about flux density; state the moment of the addressed states");
  }
  if (auto checked = check_positive(rabi_hz, "rabi_hz"); !checked) return tl::unexpected(checked.error());
  FluxReport report;
  report.rabi_hz = rabi_hz;
  report.pi_time_s = 0.5 / rabi_hz;
  report.flux_density_t = flux_density_t(rabi_hz, *transition.magnetic_moment_J_T);
  report.bloch_siegert_hz = bloch_siegert_hz(rabi_hz, transition.frequency_hz);
  report.rabi_over_carrier = rabi_hz / transition.frequency_hz;
  return report;
}

Result<FluxReport> flux_from_flux_density_t(const Transition& transition, double flux_density) {
  if (auto checked = check_positive(flux_density, "flux_density_t"); !checked) return tl::unexpected(checked.error());
  const double moment = transition.magnetic_moment_J_T.value_or(1.0);
  return flux_from_rabi_hz(transition, rabi_hz_of_flux_density(flux_density, moment));
}

}  // namespace halfturn::atom
