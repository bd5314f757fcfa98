// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>
#include <optional>

#include "model/atom/transition.hpp"

/// Light (or a microwave) and the Rabi frequency that it drives. Rabi frequencies are Omega / 2 pi in Hz; fields are peak
/// amplitudes, E(t) = E0 cos(omega t); intensities are of a travelling wave in vacuum.
namespace halfturn::atom {

/// E0 = hbar Omega / d, in V/m, and back.
double field_v_m(double rabi_hz, double dipole_C_m);
double rabi_hz_of_field(double field_v_m, double dipole_C_m);

/// I = c epsilon_0 E0^2 / 2, in W/m^2, and back.
double intensity_w_m2(double field_v_m);
double field_of_intensity_v_m(double intensity_w_m2);

/// I = 2 P / (pi w^2) at the centre of a Gaussian beam with 1/e^2 radius w of intensity, in W/m^2, and back.
double peak_intensity_w_m2(double power_w, double waist_m);
double power_of_intensity_w(double intensity_w_m2, double waist_m);

/// B0 = hbar Omega / mu, in T, for a coupling mu B0 cos(omega t), and back.
double flux_density_t(double rabi_hz, double magnetic_moment_J_T);
double rabi_hz_of_flux_density(double flux_density_t, double magnetic_moment_J_T);

/// Omega^2 / (4 omega_0) as a frequency in Hz (Bloch & Siegert, Phys. Rev. 57, 522 (1940)): leading order, good to
/// (Omega / omega_0)^2 of itself.
double bloch_siegert_hz(double rabi_hz, double carrier_hz);

/// Isat = c epsilon_0 Gamma^2 hbar^2 / (4 d^2) of the addressed states, with the total Gamma (Steck's convention:
/// I / Isat = 2 (Omega / Gamma)^2). Fault `not_available` where the transition has no dipole moment or no linewidth.
Result<double> saturation_intensity(const Transition& transition);

/// The same for a two-level pair with the whole strength of the line: pi h c Gamma^2 / (3 lambda^3 Gamma_partial). The
/// closed cycle's where there is one; smaller than that of the addressed states where there is none.
Result<double> two_level_saturation_intensity(const Transition& transition);

struct LightReport {
  double rabi_hz = std::numeric_limits<double>::quiet_NaN();
  double pi_time_s = std::numeric_limits<double>::quiet_NaN();  // 1 / (2 rabi_hz)
  double field_v_m = std::numeric_limits<double>::quiet_NaN();
  double intensity_w_m2 = std::numeric_limits<double>::quiet_NaN();
  std::optional<double> saturation{};  // I / Isat; none without a linewidth
  std::optional<double> saturation_intensity_w_m2{};
  std::optional<double> power_w{};  // where a waist is given
  double bloch_siegert_hz = std::numeric_limits<double>::quiet_NaN();
  double rabi_over_carrier = std::numeric_limits<double>::quiet_NaN();  // Omega / omega_0; the rotating wave wants << 1
  double dipole_c_m = std::numeric_limits<double>::quiet_NaN();         // of the addressed states
  double dipole_ea0 = std::numeric_limits<double>::quiet_NaN();
};

/// The report from any one of its quantities. `waist_m` adds the power. Faults: `not_available` where the transition has no
/// dipole moment (its kind is named) or, for a saturation, no linewidth; `bad_value` for a number that is not above 0.
Result<LightReport> light_from_rabi_hz(const Transition& transition, double rabi_hz, std::optional<double> waist_m = {});
Result<LightReport> light_from_pi_time_s(const Transition& transition, double pi_time_s, std::optional<double> waist_m = {});
Result<LightReport> light_from_field_v_m(const Transition& transition, double field_v_m, std::optional<double> waist_m = {});
Result<LightReport> light_from_intensity_w_m2(const Transition& transition, double intensity_w_m2,
                                              std::optional<double> waist_m = {});
Result<LightReport> light_from_saturation(const Transition& transition, double saturation,
                                          std::optional<double> waist_m = {});
Result<LightReport> light_from_power_w(const Transition& transition, double power_w, double waist_m);

/// The same for a magnetic-dipole drive.
struct FluxReport {
  double rabi_hz = std::numeric_limits<double>::quiet_NaN();
  double pi_time_s = std::numeric_limits<double>::quiet_NaN();
  double flux_density_t = std::numeric_limits<double>::quiet_NaN();
  double bloch_siegert_hz = std::numeric_limits<double>::quiet_NaN();
  double rabi_over_carrier = std::numeric_limits<double>::quiet_NaN();
};

/// Faults: `not_available` where the transition states no magnetic moment; `bad_value` for a number that is not above 0.
Result<FluxReport> flux_from_rabi_hz(const Transition& transition, double rabi_hz);
Result<FluxReport> flux_from_flux_density_t(const Transition& transition, double flux_density_t);

}  // namespace halfturn::atom
