// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "model/atom/transition.hpp"

/// The catalogue of lines (schemas/transitions.yaml) as structures, and transitions by their names. A key of the file is the
/// name of the field here that it fills.
namespace halfturn::atom {

/// A number with its one-sigma uncertainty and where it was found.
struct Quoted {
  double value = 0.0;
  double sigma = 0.0;  // 0: exact
  std::string source{};
  Status status = Status::read;
  bool computed = false;  // the source itself computed it from the line's lifetime: it must agree to the printed digit
};

struct CatalogueLine {
  std::string species{};              // `Rb87`, `Ca40+`
  std::vector<std::string> labels{};  // one word each: `D2`, `689`
  int twice_I = 0;                    // nuclear spin
  Multipole kind = Multipole::electric_dipole;
  Level lower{}, upper{};                // term, J, parity, S; no states
  std::optional<Quoted> wavelength_m{};  // in vacuum; this or the frequency must be there
  std::optional<Quoted> frequency_hz{};
  std::optional<Quoted> lifetime_s{};    // of the upper level
  std::optional<Quoted> linewidth_hz{};  // total, Gamma / 2 pi
  std::optional<Quoted> branching{};     // part of the decay that goes to the lower level; 1 where nothing partial is given
  std::optional<Quoted> partial_linewidth_hz{};
  std::optional<Quoted> partial_rate_per_s{};  // Einstein's A
  std::optional<Quoted> reduced_dipole_ea0{};  // d_S = <J||er||J'> in Steck's normalisation
  std::optional<Quoted> saturation_w_m2{};     // two-level form, pi h c Gamma^2 / (3 lambda^3 Gamma_partial)
  std::vector<std::string> recommended{};      // full names of transitions in this line; the first is shown in lists
  std::string note{};
};

/// What a line's numbers say together, each from the best that is stated.
struct LineNumbers {
  Quoted frequency_hz{};
  std::optional<Quoted> linewidth_hz{};  // total
  std::optional<Quoted> partial_linewidth_hz{};
  std::optional<Quoted> reduced_dipole_C_m{};  // of an electric-dipole line
};
Result<LineNumbers> numbers_of(const CatalogueLine& line);

/// Whether the numbers that a line states agree with each other: those measured apart within 3 combined sigma, those marked
/// `computed` to the last printed digit of the less precise (taken from the digits of its uncertainty). Fault `bad_value`
/// that gives both numbers, and the slip that would explain them where it is a known one (c over the wavelength in air,
/// partial for total width, h nu Gamma / (3 lambda^2) for the saturation intensity, Racah's normalisation for Steck's).
Result<void> check_consistency(const CatalogueLine& line);

/// Whether a line is one that can be used: names without comma, colon, hash or doubled blanks, levels that can be, an
/// electric-dipole line that the rules allow, numbers that are positive and agree, recommended names that resolve to it.
Result<void> check_line(const CatalogueLine& line);

/// The transition between two states of a line. Both states complete (F where the nucleus has spin, m); lines of another
/// kind than electric dipole may leave states and polarisation open. Between complete hyperfine states of one S1/2 level a
/// magnetic-dipole transition gets its moment, that of the electron's spin (accuracy 1e-3; of the component of the field
/// that drives it). Faults: `missing_field`, and those of the rules.
Result<Transition> make_transition(const CatalogueLine& line, const Level& lower, const Level& upper,
                                   std::optional<Polarisation> polarisation, std::string name);

/// The transition of this name. Either
///   SPECIES LABEL [F=..] [m=..] -> [F'=..] [m'=..] [POL]     Rb87 D2 F=2 m=2 -> F'=3 m'=3 sigma+
/// or
///   SPECIES LOWER [F=..] [m=..] -> UPPER [F'=..] [m'=..] [POL]     Sr88 1S0 -> 3P1 m=0 pi
/// with POL one of sigma- pi sigma+. What only one value can have may be left out: F where there is one, one of m, m' and
/// POL. An m without its prime after the arrow is read as m' only where that cannot differ or the lower state has one m.
/// Faults at `transition`: `bad_value` with the nearest known names, `missing_field` with the values to choose from.
Result<Transition> resolve(std::string_view name, std::span<const CatalogueLine> lines);

/// Every recommended name, in the catalogue's order.
std::vector<std::string> names(std::span<const CatalogueLine> lines);

/// `even` is +1, `odd` -1.
Result<int> read_parity(std::string_view text, const std::string& where);

}  // namespace halfturn::atom
