// SPDX-License-Identifier: Apache-2.0
#pragma once
#include "tests/campaign/families.hpp"

/// What the families have in common: random numbers over ranges, axes, configurations, counts.
namespace halfturn::campaign {

double uniform(Random& random, double low, double high);
double log_uniform(Random& random, double low, double high);
double normal(Random& random);
bool chance(Random& random, double probability);
double either_sign(Random& random, double magnitude);  // with a coin's sign

enum class Grid { even, random, geometric, gapped, first_missing };
enum class Stated { either, yes, no };

/// Ranges of a family, drawn evenly in the logarithm.
struct Ranges {
  double points_low = 12, points_high = 200;
  double shots_low = 20, shots_high = 1000;
  double cycles_low = 0.3, cycles_high = 30;  // flops
  double limit_low = 0, limit_high = 0.8;     // flops: frequency over the sampling limit of an even grid
  double contrast_low = 0.1, contrast_high = 0.98;
  Grid grid = Grid::even;
  Stated contrast = Stated::either, dead_time = Stated::either, expect = Stated::either;
};

/// What is settled before the apparatus is completed.
struct Plan {
  Ranges ranges;
  std::size_t points = 0;
  double shots = 0;
  double span_s = 0;                 // flops
  double drift = 0;                  // of the coupling along the scan, relative
  double outliers = 0;               // share of points that are none of the signal
  double overdispersion = 1;         // variance over the binomial's
};

/// A flop's points, shots, coupling, readout and dead time; the family then changes the truth, and `finish_flop` lays the axis,
/// writes the configuration and counts.
Plan begin_flop(Random& random, const Ranges& ranges, Case& into);
void finish_flop(Random& random, const Plan& plan, Case& into);

/// The axis of a flop: `span_s` of time on the family's grid.
std::vector<double> flop_axis(Random& random, Grid grid, std::size_t points, double span_s);

/// The same for a line: pulse area, then by the family damping or spread, then a window of `half_width` (in widths of the line)
/// whose centre lies `centre` from the line (in widths).
Plan begin_line(Random& random, const Ranges& ranges, double area_low, double area_high, Case& into);
void finish_line(Random& random, const Plan& plan, double offset, double centre, double half_width, Case& into);

/// Counts for every point of the axis.
void count(Random& random, const Plan& plan, Case& into);

/// Counts of given probabilities.
void count_given(Random& random, const Plan& plan, std::vector<double> bright, Case& into);

}  // namespace halfturn::campaign
