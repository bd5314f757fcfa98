// SPDX-License-Identifier: Apache-2.0
#include <cmath>
#include <string>

#include "model/atom/catalogue.hpp"
#include "model/atom/dipole.hpp"
#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"

namespace halfturn::atom {
namespace {

using namespace constants;

/// A prediction for a stated number: value, relative one-sigma, relative weight of the last printed digits.
struct Predicted {
  double value = 0.0;
  double sigma = 0.0;
  double digit = 0.0;
  bool computed = false;
  std::string from{};
};

/// One unit of the last printed digit: the uncertainty is a whole number of them, of at most four figures.
double last_digit(double sigma) {
  if (!(sigma > 0.0)) return 0.0;
  const int top = static_cast<int>(std::floor(std::log10(sigma) + 1e-9));
  for (int power = top; power > top - 4; --power) {
    const double units = sigma / std::pow(10.0, power);
    if (std::abs(units - std::round(units)) < 1e-6 * units) return std::pow(10.0, power);
  }
  return sigma;
}

/// The prediction grows with `number` to the power `exponent`.
void depend(Predicted& predicted, const Quoted& number, double exponent, const std::string& field) {
  predicted.sigma = std::hypot(predicted.sigma, exponent * number.sigma / number.value);
  predicted.digit += std::abs(exponent) * last_digit(number.sigma) / std::abs(number.value);
  predicted.computed = predicted.computed || number.computed;
  predicted.from += (predicted.from.empty() ? "" : ", ") + field;
}

/// Measured apart: 3 combined sigma. Computed one from the other: the printed digits.
bool agrees(const Quoted& stated, const Predicted& predicted) {
  const double difference = std::abs(stated.value / predicted.value - 1.0);
  const double digits = last_digit(stated.sigma) / std::abs(stated.value) + predicted.digit;
  // 1e-9: rounding of the arithmetic and CODATA's uncertainty of epsilon_0 and a0 (1.6e-10).
  if (stated.computed || predicted.computed) return difference <= digits + 1e-9;
  return difference <= 3.0 * std::hypot(stated.sigma / stated.value, predicted.sigma) + 1e-9;
}

std::string line_name(const CatalogueLine& line) {
  return line.species + " " + (line.labels.empty() ? line.lower.term + " -> " + line.upper.term : line.labels.front());
}

/// A known slip: what a wrong number would be over the right one, within a relative width.
struct Slip {
  double ratio;
  double width;
  std::string words;
};

template <class Slips>
Result<void> compare(const CatalogueLine& line, const std::string& field, const std::optional<Quoted>& stated,
                     const std::optional<Predicted>& predicted, const Slips& slips) {
  if (!stated || !predicted || agrees(*stated, *predicted)) return {};
  const double ratio = stated->value / predicted->value;
  std::string message = line_name(line) + ": found " + plain(stated->value, 9) + ", but " + predicted->from + " give" +
                        (predicted->from.find(',') == std::string::npos ? "s " : " ") + plain(predicted->value, 9) +
                        ", and the stated uncertainties do not cover the difference";
  for (const Slip& slip : slips) {
    if (std::abs(ratio / slip.ratio - 1.0) < slip.width) {
      message += "; " + slip.words;
      break;
    }
  }
  return fault("bad_value", "transitions." + field, std::move(message));
}

std::optional<Predicted> predict_frequency(const CatalogueLine& line) {
  if (!line.wavelength_m) return std::nullopt;
  Predicted predicted{kSpeedOfLight / line.wavelength_m->value};
  depend(predicted, *line.wavelength_m, 1.0, "wavelength_m");
  return predicted;
}

std::optional<Predicted> predict_total(const CatalogueLine& line) {
  if (!line.lifetime_s) return std::nullopt;
  Predicted predicted{1.0 / (kTwoPi * line.lifetime_s->value)};
  depend(predicted, *line.lifetime_s, 1.0, "lifetime_s");
  return predicted;
}

/// The partial width from lifetime (else total width) and branching.
std::optional<Predicted> predict_partial_from_total(const CatalogueLine& line) {
  auto predicted = predict_total(line);
  if (!predicted && line.linewidth_hz) {
    predicted = Predicted{line.linewidth_hz->value};
    depend(*predicted, *line.linewidth_hz, 1.0, "linewidth_hz");
  }
  if (!predicted || !line.branching) return predicted;
  predicted->value *= line.branching->value;
  depend(*predicted, *line.branching, 1.0, "branching");
  return predicted;
}

/// The partial width from whatever is stated, except the moment.
std::optional<Predicted> predict_partial(const CatalogueLine& line) {
  const bool is_partial_stated = line.partial_linewidth_hz || line.partial_rate_per_s;
  if (line.branching || !is_partial_stated) {
    auto from_total = predict_partial_from_total(line);
    if (from_total || !is_partial_stated) return from_total;
  }
  const bool is_width = line.partial_linewidth_hz.has_value();
  const Quoted& stated = is_width ? *line.partial_linewidth_hz : *line.partial_rate_per_s;
  Predicted predicted{is_width ? stated.value : stated.value / kTwoPi};
  depend(predicted, stated, 1.0, is_width ? "partial_linewidth_hz" : "partial_rate_per_s");
  return predicted;
}

std::optional<Predicted> predict_dipole_ea0(const CatalogueLine& line) {
  auto predicted = predict_partial(line);
  const auto numbers = numbers_of(line);
  if (!predicted || !numbers) return std::nullopt;
  const double moment =
      reduced_dipole_C_m(numbers->frequency_hz.value, predicted->value, line.lower.twice_J, line.upper.twice_J);
  predicted->value = moment / kDipoleAtomicUnit;
  predicted->sigma *= 0.5;
  predicted->digit *= 0.5;
  return predicted;
}

/// pi h c Gamma^2 / (3 lambda^3 Gamma_partial); the relative sigma is that of the width (twice the total's less the
/// partial's).
std::optional<Predicted> predict_saturation(const CatalogueLine& line) {
  auto predicted = predict_partial(line);
  const auto numbers = numbers_of(line);
  if (!predicted || !numbers || !numbers->linewidth_hz) return std::nullopt;
  const double total = kTwoPi * numbers->linewidth_hz->value, wavenumber = numbers->frequency_hz.value / kSpeedOfLight;
  const double fraction = predicted->value / numbers->linewidth_hz->value;
  predicted->value = kPi * kPlanck * kSpeedOfLight * total * wavenumber * wavenumber * wavenumber / (3.0 * fraction);
  return predicted;
}

double branching_of(const CatalogueLine& line) {
  const auto numbers = numbers_of(line);
  if (!numbers || !numbers->linewidth_hz || !numbers->partial_linewidth_hz) return 1.0;
  return numbers->partial_linewidth_hz->value / numbers->linewidth_hz->value;
}

Result<void> check_positive(const CatalogueLine& line) {
  const std::pair<const char*, const std::optional<Quoted>*> all[] = {{"wavelength_m", &line.wavelength_m},
                                                                      {"frequency_hz", &line.frequency_hz},
                                                                      {"lifetime_s", &line.lifetime_s},
                                                                      {"linewidth_hz", &line.linewidth_hz},
                                                                      {"branching", &line.branching},
                                                                      {"partial_linewidth_hz", &line.partial_linewidth_hz},
                                                                      {"partial_rate_per_s", &line.partial_rate_per_s},
                                                                      {"reduced_dipole_ea0", &line.reduced_dipole_ea0},
                                                                      {"saturation_w_m2", &line.saturation_w_m2}};
  for (const auto& [field, number] : all) {
    if (!*number) continue;
    const double value = (*number)->value, sigma = (*number)->sigma;
    if (std::isfinite(value) && value > 0.0 && std::isfinite(sigma) && sigma >= 0.0 && sigma < value) continue;
    return fault("bad_value", std::string("transitions.") + field,
                 line_name(line) + ": found " + plain(value) + " with sigma " + plain(sigma) +
                     ", expected a finite number above 0 with a sigma of at least 0 and below the number");
  }
  if (!line.branching || line.branching->value <= 1.0) return {};
  return fault("bad_value", "transitions.branching",
               line_name(line) + ": found " + plain(line.branching->value) + ", expected a fraction of at most 1");
}

Result<void> check_widths(const CatalogueLine& line) {
  const double branching = branching_of(line);
  const Slip partial{branching, branching < 1.0 ? 0.2 * (1.0 - branching) : 0.0,
                     "that looks like the partial width; the total is wanted"};
  const Slip angular{kTwoPi, 0.02, "that looks like the angular rate; divide it by 2 pi"};
  const Slip total{1.0 / branching, partial.width, "that looks like the total width; the partial one is wanted"};
  if (auto checked = compare(line, "linewidth_hz", line.linewidth_hz, predict_total(line),
                             std::initializer_list<Slip>{partial, angular});
      !checked) {
    return checked;
  }
  auto from_total = line.branching ? predict_partial_from_total(line) : std::nullopt;
  if (auto checked = compare(line, "partial_linewidth_hz", line.partial_linewidth_hz, from_total,
                             std::initializer_list<Slip>{total, angular});
      !checked) {
    return checked;
  }
  if (from_total) from_total->value *= kTwoPi;
  return compare(line, "partial_rate_per_s", line.partial_rate_per_s, from_total, std::initializer_list<Slip>{total});
}

Result<void> check_partial_below_total(const CatalogueLine& line) {
  const auto numbers = numbers_of(line);
  if (!numbers || !numbers->linewidth_hz || !numbers->partial_linewidth_hz) return {};
  const Quoted &total = *numbers->linewidth_hz, &partial = *numbers->partial_linewidth_hz;
  if (partial.value <= total.value + 3.0 * std::hypot(partial.sigma, total.sigma)) return {};
  return fault("bad_value", "transitions.partial_linewidth_hz",
               line_name(line) + ": the decay to the lower level, " + engineering(partial.value, "Hz") +
                   ", is more than the total, " + engineering(total.value, "Hz"));
}

Result<void> check_dipole(const CatalogueLine& line) {
  const double racah = std::sqrt(line.lower.twice_J + 1.0);
  const Slip slips[] = {
      {racah, racah > 1.0 ? 0.05 : 0.0, "that looks like Racah's normalisation, sqrt(2J+1) larger than Steck's"}};
  return compare(line, "reduced_dipole_ea0", line.reduced_dipole_ea0, predict_dipole_ea0(line), slips);
}

Result<void> check_saturation(const CatalogueLine& line) {
  const double branching = branching_of(line);
  const double width = branching < 1.0 ? 0.2 * (1.0 - branching) : 0.0;
  const Slip slips[] = {
      {1.0 / kPi, 0.05, "that looks like h nu Gamma / (3 lambda^2), pi smaller than the saturation intensity"},
      {branching * branching, width,
       "that looks like the one of the partial width alone; it goes with total squared over partial"},
      {branching, width, "that looks like the one of the total width alone; it goes with total squared over partial"}};
  return compare(line, "saturation_w_m2", line.saturation_w_m2, predict_saturation(line), slips);
}

}  // namespace

Result<void> check_consistency(const CatalogueLine& line) {
  if (auto checked = check_positive(line); !checked) return checked;
  if (auto numbers = numbers_of(line); !numbers) return tl::unexpected(numbers.error());
  // n - 1 of air is 2.7e-4 to 3.3e-4 between 0.2 and 2 um (Peck & Reeder, J. Opt. Soc. Am. 62, 958 (1972)).
  const Slip air[] = {{1.0003, 4e-5, "that looks like c over the wavelength in air"},
                      {1.0 / 1.0003, 4e-5, "the stated wavelength looks like the one in air; the one in vacuum is wanted"}};
  if (auto checked = compare(line, "frequency_hz", line.frequency_hz, predict_frequency(line), air); !checked)
    return checked;
  if (auto checked = check_widths(line); !checked) return checked;
  if (auto checked = check_partial_below_total(line); !checked) return checked;
  if (line.kind != Multipole::electric_dipole) return {};
  if (auto checked = check_dipole(line); !checked) return checked;
  return check_saturation(line);
}

}  // namespace halfturn::atom
