// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "model/quantity/result.hpp"

/// A driven transition between two states, with what its light needs. Spins and projections are doubled (`twice_J` = 3 is
/// J = 3/2). Dipole moments follow Steck: d_S = <J||er||J'> in his normalisation (Racah's is sqrt(2J+1) larger).
namespace halfturn::atom {

enum class Multipole {
  electric_dipole,
  magnetic_dipole,
  electric_quadrupole,
  two_photon,
  induced,  // by a field or by hyperfine mixing, such as a J = 0 to J = 0 clock line
};

/// q = m' - m on absorption.
enum class Polarisation { sigma_minus = -1, pi = 0, sigma_plus = +1 };

/// How well a number's source was seen. Ordered: the later, the weaker.
enum class Status { read, quoted, recalled };

struct Level {
  std::string term;  // as in the catalogue: `5S1/2`, `3P1`
  int twice_J = 0;
  std::optional<int> twice_F{};  // hyperfine; none where the nucleus has no spin
  std::optional<int> twice_m{};  // of F, or of J without hyperfine structure
  std::optional<int> parity{};   // +1 even, -1 odd
  std::optional<int> twice_S{};  // a change of spin forbids nothing; kept to be shown
};

struct Transition {
  std::string name;
  Multipole multipole = Multipole::electric_dipole;
  double wavelength_m = std::numeric_limits<double>::quiet_NaN();  // in vacuum; of the line's centre of gravity
  double frequency_hz = std::numeric_limits<double>::quiet_NaN();  // c / wavelength
  std::optional<double> linewidth_hz{};          // total natural linewidth of the upper level, Gamma / 2 pi
  std::optional<double> partial_linewidth_hz{};  // the part that decays to the lower level
  std::optional<double> state_linewidth_hz{};    // the part that decays from the upper state to the lower state
  std::optional<double> reduced_dipole_C_m{};    // d_S, > 0
  std::optional<double> angular_factor{};        // matrix element of the addressed states over d_S, with its sign
  std::optional<double> dipole_C_m{};            // d = |angular_factor| d_S, or as stated; > 0
  std::optional<double> dipole_sigma_C_m{};      // one sigma, where the source gives one
  std::optional<double> magnetic_moment_J_T{};   // of the addressed states, as stated; > 0
  Level lower{}, upper{};
  int twice_I = 0;
  std::optional<Polarisation> polarisation{};
  std::vector<std::string> sources{};  // of the numbers used
  Status status = Status::read;        // the weakest of the numbers used
  std::vector<std::string> assumed{};  // sentences: what was taken for granted
};

/// A transition by its numbers. Of wavelength and frequency one is needed. Then either a moment, or `linewidth_hz` (or
/// `lifetime_s`), both levels and their states (or `angular_factor`).
struct InlineTransition {
  std::string name{};
  Multipole multipole = Multipole::electric_dipole;
  std::optional<double> wavelength_m{};  // vacuum
  std::optional<double> frequency_hz{};
  std::optional<double> linewidth_hz{};         // total, Gamma / 2 pi
  std::optional<double> lifetime_s{};           // of the upper level
  std::optional<double> branching{};            // part of its decay that goes to the lower level; assumed 1
  std::optional<double> angular_factor{};       // d / d_S: 1/sqrt(2) for a closed D2 cycle, 1/sqrt(3) for pi at J = 1/2
  std::optional<double> moment_C_m{};           // d of the addressed states
  std::optional<double> magnetic_moment_J_T{};  // of the addressed states
  std::optional<Level> lower{}, upper{};
  int twice_I = 0;
  std::optional<Polarisation> polarisation{};
};

/// The transition that these numbers describe. Faults: `missing_field` for what it takes and is not there; `bad_value` for
/// numbers that are not positive, for numbers that contradict each other (wavelength and frequency by more than 1e-4, which
/// tells air from vacuum; lifetime and linewidth, or the moment and what it follows from, by more than 1 %), for a moment
/// larger than the linewidth allows, and for what the electric-dipole selection rules forbid. A kind other than
/// electric dipole, and a stated moment, are exempt from the selection rules.
Result<Transition> inline_transition(const InlineTransition& given);

/// `electric_dipole`, `magnetic_dipole`, `electric_quadrupole`, `two_photon`, `induced`.
std::string_view name_of(Multipole multipole);
Result<Multipole> read_multipole(std::string_view text, const std::string& where);

/// `sigma-`, `pi`, `sigma+`; the Greek letters are read too.
std::string_view name_of(Polarisation polarisation);
std::optional<Polarisation> read_polarisation(std::string_view text);

/// `read` (in the source itself), `quoted` (read as quoted elsewhere), `recalled` (from memory, not verified).
std::string_view name_of(Status status);
Result<Status> read_status(std::string_view text, const std::string& where);

}  // namespace halfturn::atom
