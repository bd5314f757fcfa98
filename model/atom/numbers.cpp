// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <cmath>

#include "model/atom/catalogue.hpp"
#include "model/atom/dipole.hpp"
#include "model/quantity/constants.hpp"

namespace halfturn::atom {
namespace {

using constants::kDipoleAtomicUnit;
using constants::kSpeedOfLight;
using constants::kTwoPi;

double relative(const Quoted& number) { return number.sigma / std::abs(number.value); }

/// value(from) with the relative uncertainty of `from` times |exponent|.
Quoted follow(const Quoted& from, double value, double exponent) {
  Quoted made = from;
  made.value = value;
  made.sigma = std::abs(value * exponent) * relative(from);
  return made;
}

/// A value that follows from two numbers measured apart; sigma by quadrature.
Quoted follow(const Quoted& a, double exponent_a, const Quoted& b, double exponent_b, double value) {
  Quoted made{value, std::abs(value) * std::hypot(exponent_a * relative(a), exponent_b * relative(b)), a.source,
              std::max(a.status, b.status), a.computed || b.computed};
  if (b.source != a.source) made.source += "; " + b.source;
  return made;
}

Quoted frequency_of(const CatalogueLine& line) {
  if (!line.wavelength_m) return *line.frequency_hz;
  const Quoted from_wavelength = follow(*line.wavelength_m, kSpeedOfLight / line.wavelength_m->value, 1.0);
  if (line.frequency_hz && relative(*line.frequency_hz) <= relative(from_wavelength)) return *line.frequency_hz;
  return from_wavelength;
}

std::optional<Quoted> stated_partial(const CatalogueLine& line, const Quoted& frequency_hz) {
  if (line.partial_linewidth_hz) return line.partial_linewidth_hz;
  if (line.partial_rate_per_s) return follow(*line.partial_rate_per_s, line.partial_rate_per_s->value / kTwoPi, 1.0);
  if (!line.reduced_dipole_ea0 || line.kind != Multipole::electric_dipole) return std::nullopt;
  const double moment_C_m = line.reduced_dipole_ea0->value * kDipoleAtomicUnit;
  const double width_hz = partial_linewidth_hz(frequency_hz.value, moment_C_m, line.lower.twice_J, line.upper.twice_J);
  return follow(*line.reduced_dipole_ea0, 2.0, frequency_hz, 3.0, width_hz);
}

std::optional<Quoted> total_of(const CatalogueLine& line, const std::optional<Quoted>& partial) {
  if (line.lifetime_s) return follow(*line.lifetime_s, 1.0 / (kTwoPi * line.lifetime_s->value), 1.0);
  if (line.linewidth_hz) return line.linewidth_hz;
  if (partial && line.branching) return follow(*partial, 1.0, *line.branching, 1.0, partial->value / line.branching->value);
  return std::nullopt;
}

std::optional<Quoted> partial_of(const CatalogueLine& line, const std::optional<Quoted>& total,
                                 const std::optional<Quoted>& stated) {
  if (total && line.branching && (line.lifetime_s || line.linewidth_hz)) {
    return follow(*total, 1.0, *line.branching, 1.0, total->value * line.branching->value);
  }
  if (stated && !stated->computed) return stated;
  return total;
}

}  // namespace

Result<LineNumbers> numbers_of(const CatalogueLine& line) {
  if (!line.wavelength_m && !line.frequency_hz) {
    return fault("missing_field", "transitions",
                 line.species + " has a line with neither wavelength_m nor frequency_hz; one is needed");
  }
  LineNumbers numbers;
  numbers.frequency_hz = frequency_of(line);
  const auto stated = stated_partial(line, numbers.frequency_hz);
  numbers.linewidth_hz = total_of(line, stated);
  numbers.partial_linewidth_hz = partial_of(line, numbers.linewidth_hz, stated);
  if (line.kind != Multipole::electric_dipole || !numbers.partial_linewidth_hz) return numbers;
  const double moment_C_m = reduced_dipole_C_m(numbers.frequency_hz.value, numbers.partial_linewidth_hz->value,
                                               line.lower.twice_J, line.upper.twice_J);
  numbers.reduced_dipole_C_m = follow(*numbers.partial_linewidth_hz, 0.5, numbers.frequency_hz, 1.5, moment_C_m);
  return numbers;
}

}  // namespace halfturn::atom
