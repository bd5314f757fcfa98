// SPDX-License-Identifier: Apache-2.0
// Whole fits of simple scans against other programs on the same likelihood: SciPy's and lmfit's minimizers, and Newton's method in forty
// digits, by tests/reference/infer_fits.py.
#include <fstream>
#include <map>

#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;
using constants::kPi;

namespace {

struct Minima {
  double exact = 0, scipy = 0, lmfit = 0, sigma = 0, low = 0, high = 0;
};

struct Reference {
  std::string name, axis, readout, dynamics;
  Prior prior;
  double pulse_length_s = 0, deviance = 0;
  std::vector<double> at, observed, weight;
  std::map<std::string, Minima> estimates;
};

std::vector<Reference> read_all() {
  std::ifstream file(std::string(HALFTURN_BINARY_DIR) + "/reference/infer_fits.txt");
  std::vector<Reference> all;
  Reference r;
  std::size_t points = 0, estimates = 0;
  while (file >> r.name >> r.axis >> r.readout >> r.dynamics >> r.prior.dead_time.mean >> r.prior.dead_time.sigma >> r.pulse_length_s >> points >>
         estimates >> r.deviance) {
    r.prior.candidates = DynamicsSet::none();
    r.prior.candidates.add(dynamics_named(r.dynamics).value());
    for (auto* array : {&r.at, &r.observed, &r.weight}) array->assign(points, 0.0);
    for (std::size_t i = 0; i < points; ++i) file >> r.at[i] >> r.observed[i] >> r.weight[i];
    r.estimates.clear();
    for (std::size_t i = 0; i < estimates; ++i) {
      std::string name, low, high;
      Minima m;
      file >> name >> m.exact >> m.scipy >> m.lmfit >> m.sigma >> low >> high;
      m.low = low == "nan" ? kUnknown : std::stod(low);
      m.high = high == "nan" ? kUnknown : std::stod(high);
      r.estimates[name] = m;
    }
    all.push_back(r);
  }
  return all;
}

void agree(const std::string& what, const Estimate& ours, const Minima& theirs) {
  INFO(what << ": " << (ours.value - theirs.exact) / theirs.sigma << " sigma off, sigma by " << ours.sigma / theirs.sigma - 1.0 << ", ends by "
            << (ours.low - theirs.low) / theirs.sigma << " and " << (ours.high - theirs.high) / theirs.sigma << " sigma");
  // The solver stops where it promises to gain less than 1e-10, at most 1.4e-5 of a sigma away; its last step leaves about a tenth.
  for (const double other : {theirs.exact, theirs.scipy, theirs.lmfit}) CHECK(std::abs(ours.value - other) < 2e-6 * theirs.sigma);
  CHECK(ours.sigma == Approx(theirs.sigma).epsilon(1e-4));
  if (std::isnan(theirs.low)) return;
  CHECK(std::abs(ours.low - theirs.low) < 1e-4 * theirs.sigma);
  CHECK(std::abs(ours.high - theirs.high) < 1e-4 * theirs.sigma);
}

/// A rate in place of its time.
Estimate rate_of(const Estimate& time) {
  Estimate rate;
  rate.value = 1.0 / time.value;
  rate.sigma = time.sigma * rate.value * rate.value;
  return rate;
}

}  // namespace

TEST_CASE("simple scans have the minima, errors and intervals that SciPy and lmfit find") {
  const auto references = read_all();
  REQUIRE(references.size() == 8);
  for (const auto& r : references) {
    Sample sample;
    sample.axis = r.at;
    sample.observed = r.observed;
    sample.weight = r.weight;
    sample.view(r.axis == "detuning" ? Axis::detuning : Axis::duration);
    sample.batch.pulse_length_s = r.pulse_length_s;
    sample.batch.readout = r.readout == "binomial"  ? Readout::Kind::binomial
                           : r.readout == "poisson" ? Readout::Kind::poisson
                                                    : Readout::Kind::gaussian;
    FitOptions options;
    options.pulses = {{kPi, 1.0}};
    const Fit fit = fit_one(sample, r.prior, options);
    INFO(r.name);
    REQUIRE(fit.outcome == FitOutcome::fitted);
    REQUIRE(fit.quality.scatter == 1.0);
    REQUIRE_FALSE(fit.prior.drift);
    // The points' share of what is least: where a prior pulls it goes with the first power of what x is off by.
    CHECK(fit.quality.deviance == Approx(r.deviance).epsilon(1e-7));
    for (const auto& [name, theirs] : r.estimates) {
      if (name == "rabi") agree(name, fit.rabi, theirs);
      else if (name == "line_offset") agree(name, fit.line_offset, theirs);
      else if (name == "dead_time") agree(name, fit.dead_time_s, theirs);
      else if (name == "floor") agree(name, fit.floor, theirs);
      else if (name == "contrast") agree(name, fit.contrast, theirs);
      else if (name == "decay") agree(name, rate_of(fit.decay_s), theirs);
      else if (name == "pi_pulse") agree(name, fit.pulse_length_s.at(0), theirs);
      else FAIL("an estimate called " << name);
    }
  }
}
