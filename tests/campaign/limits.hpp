// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>
#include <map>
#include <ostream>
#include <string>
#include <vector>

#include "tests/campaign/not_yet.hpp"
#include "tests/campaign/run.hpp"
#include "tests/campaign/two_point.hpp"

/// Figures that no procedure whatever could reach, from what the expected counts tell (two_point.hpp, imposter.hpp).
///
/// What is asked of a procedure, beside the figure that is bounded:
/// 1. Of every kind of healthy scan that the data can decide (score.hpp, undecidable.hpp) it uses at least 98 %, and at
///    most three in a million are wrong. The campaign asks it of a family's mean; here it is asked of each imposter, for
///    who may choose which scans to refuse has to know beforehand which are drawn.
/// 2. Of every kind of healthy scan that another family draws, intervals cover within the band of that family, and are no
///    longer than the symmetric ones about an efficient estimate that cover at the band's upper edge. They may be put off
///    the centre as far as the band's lower edge lets them (reach), and go astray as seldom as its coverage and 1.05 of the
///    Cramer-Rao bound say (astray). The campaign does not measure lengths, and one who takes longer intervals covers more:
///    Limit::stretch says how much longer it takes for the target.
/// 3. Of a drive whose dead time is misstated, what is configured is believed as far as two of its sigmas, as of a drive
///    where it is right.
/// A bound from one imposter holds alone; of several the tightest is taken. Log likelihood ratios and estimates are taken
/// as normal.
namespace halfturn::campaign {

/// An imposter's word on the coverage of one scan.
struct Contest {
  infer::Dynamics dynamics = infer::Dynamics::undamped;
  Apart apart;
  double away = 0;   // between the two answers, in standard deviations of an efficient estimate of the imposter's
  double taken = 0;  // Halfturn's 95 % interval of the imposter's expected counts over that of 2 * 1.96 such; 0: not asked
};

/// One scan: what no procedure can do better, and what was done.
struct ScanLimit {
  std::uint64_t seed = 0, index = 0;
  std::vector<Contest> contests;            // of healthy imposters
  std::int64_t alike = 1;                   // frequencies that fit alike
  bool misstated = false;                   // its dead time
  double missed = 0;                        // least probability of use with a 95 % interval that does not hold the truth
  double wrong_any = 0, wrong_maximum = 0;  // least, by whose answers
  Scored scored;
  double half_widths = 0;  // from the answer to the truth, over that to the end of the 95 % interval on that side; converged
};
ScanLimit limit_of(const Case& of, const Family& family);

enum class Level { narrow, wide };  // of intervals: 68.27 % and 95 %

/// The most that the intervals of this scan cover, where those of imposters are at most `stretch` times as long as said
/// above, and the contest that says so; 1 and null where none speaks.
struct Covered {
  double most = 1;
  const Contest* by = nullptr;
};
Covered most_covered(const ScanLimit& scan, Level level, double stretch);

/// A figure of a family. NaN where one is not told.
struct Limit {
  std::string family;
  Figure figure = Figure::wrong;
  std::int64_t scans = 0;  // behind the measured figure
  double target = 0;
  double nobody = 0;       // wrong: least of any procedure; coverages: most of any within the bands
  double reachable = 0;    // wrong: least of one whose answers of single scans are efficient; coverages: most with nominal ones
                           // where no imposter speaks; of used scans: with the uses of Halfturn that held the truth, and no
                           // misses but those forced
  double measured = 0;     // Halfturn, on the same scans
  // Coverages: how many times as long intervals on the imposters' scans must be for `nobody` to be the target (NaN: no length
  // does), and how many times as long Halfturn's are there, root mean square.
  double stretch = std::numeric_limits<double>::quiet_NaN(), taken = std::numeric_limits<double>::quiet_NaN();
  std::map<std::string, std::int64_t> imposters;  // scans whose most is below the nominal level, by candidate
  std::vector<ScanLimit> losses;  // lost though nothing in the data forces it: wrong, or missed by over two half widths
};

/// Families with a figure out of band that is of this kind: wrong scans or coverage.
bool has_limits(const Family& family);

/// Wrong scans and coverage of families, scans drawn as run() draws them.
std::vector<Limit> limits(const Order& order, const std::vector<const Family*>& wanted);

void print_limits(std::ostream& out, const std::vector<Limit>& limits);
void print_limits_json(std::ostream& out, const std::vector<Limit>& limits);

}  // namespace halfturn::campaign
