// SPDX-License-Identifier: Apache-2.0
#include <cmath>

#include "model/infer/fit.hpp"
#include "model/quantity/constants.hpp"
#include "tests/model/infer/fit_samples.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::infer;
using namespace halfturn::tests;

TEST_CASE("intervals at a second level are those of a fit at that level, and leave the first as they are") {
  // The counts of "a flop is fitted to SciPy's answer on the same likelihood" (fit_test), and one sigma of the normal law.
  constexpr double kOneSigma = 0.6826894921370859;
  Sample sample;
  for (int i = 1; i <= 30; ++i) sample.axis.push_back(0.35e-6 * i);
  sample.observed = {7, 16, 23, 39, 64, 80, 98, 117, 127, 135, 148, 140, 135, 121, 106, 75, 62, 44, 31, 18, 10, 4, 11, 15, 29, 56, 70, 85, 114, 129};
  sample.weight.assign(30, 150.0);
  sample.view();
  FitOptions options;
  options.pulses = {{constants::kPi, 1.0}, {constants::kPi / 2, 1.0}};
  const Fit plain = fit_one(sample, {}, options);
  options.second_level = kOneSigma;
  const Fit both = fit_one(sample, {}, options);
  options.level = kOneSigma;
  options.second_level = 0;
  const Fit narrow = fit_one(sample, {}, options);
  REQUIRE(both.second.pulse_length_s.size() == 2);
  CHECK(plain.second.pulse_length_s.empty());
  for (std::size_t i = 0; i < 2; ++i) {
    CHECK(both.pulse_length_s[i].low == plain.pulse_length_s[i].low);
    CHECK(both.pulse_length_s[i].high == plain.pulse_length_s[i].high);
    CHECK(both.second.pulse_length_s[i].low == narrow.pulse_length_s[i].low);
    CHECK(both.second.pulse_length_s[i].high == narrow.pulse_length_s[i].high);
    CHECK(both.second.pulse_length_s[i].low > both.pulse_length_s[i].low);
    CHECK(both.second.pulse_length_s[i].high < both.pulse_length_s[i].high);
  }
}
