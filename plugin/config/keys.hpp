// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string_view>

/// The keys of a configuration, map by map. schemas/configuration.schema.json says what they mean; a test holds the two
/// together. `Later` keys are those of the contract that this version does not have.
namespace halfturn::config::keys {

using std::string_view;

inline constexpr string_view kTop[] = {"format", "sockets", "log", "insecure", "drives"};
inline constexpr string_view kTopLater[] = {"catalogue", "keys", "secret_keys", "public_keys", "curve"};
inline constexpr string_view kSockets[] = {"requests", "feed", "results", "display"};
inline constexpr string_view kDrive[] = {"transition", "beam",   "carrier_uncertainty", "readout", "expect",
                                         "dynamics",   "pulses", "switching",           "accept",  "lost_reads",
                                         "impurity",     "motion"};
inline constexpr string_view kDriveLater[] = {"light_shift"};
inline constexpr string_view kMotion[] = {"lamb_dicke", "sideband", "phonon_ratio"};
inline constexpr string_view kBeam[] = {"waist"};
inline constexpr string_view kReadout[] = {"kind", "floor", "contrast"};
inline constexpr string_view kExpect[] = {"rabi"};
inline constexpr string_view kSwitching[] = {"dead_time", "uncertainty"};
inline constexpr string_view kAccept[] = {"max_step",         "min_cycles",        "max_angle_error", "min_evidence",
                                          "max_carrier_step", "max_carrier_error", "rival_margin",    "min_p_value"};
inline constexpr string_view kPulse[] = {"angle", "length", "tick", "limits", "shape", "adjust", "amplitude", "step"};
inline constexpr string_view kShape[] = {"kind", "edge", "width"};
inline constexpr string_view kTransition[] = {"name",     "kind",      "wavelength",     "frequency",   "linewidth",
                                              "lifetime", "branching", "angular_factor", "moment",      "magnetic_moment",
                                              "lower",    "upper",     "nuclear_spin",   "polarisation"};
inline constexpr string_view kLevel[] = {"term", "J", "F", "m", "parity", "S"};

inline constexpr string_view kShapes[] = {"square", "gaussian", "blackman", "raised_cosine"};
inline constexpr string_view kReadoutKinds[] = {"counts", "signal", "photons"};  // in the order of wire::ReadoutKind
inline constexpr string_view kLostReads[] = {"dark", "bright"};                  // in the order of dynamics::LostReads
inline constexpr string_view kAdjust[] = {"length", "amplitude"};                // in the order of recalibrate::Adjust

}  // namespace halfturn::config::keys
