// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "tests/campaign/families.hpp"

/// The families of detuning scans: pulse areas from 0.3 to 4 pi, and what broadens, hides or doubles a line.
namespace halfturn::campaign::lines {

void clean(Random& random, Case& into);
void far(Random& random, Case& into);
void power(Random& random, Case& into);
void doppler(Random& random, Case& into);
void decay(Random& random, Case& into);
void edge(Random& random, Case& into);
void beyond(Random& random, Case& into);
void side_lobe(Random& random, Case& into);
void two(Random& random, Case& into);
void missing(Random& random, Case& into);

}  // namespace halfturn::campaign::lines
