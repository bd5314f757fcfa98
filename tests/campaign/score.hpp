// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>
#include <map>
#include <span>
#include <string>
#include <vector>

#include "tests/campaign/answer.hpp"
#include "tests/campaign/bound.hpp"

/// A case against its answer, and a family's cases together.
namespace halfturn::campaign {

/// What the campaign keeps of one case.
struct Scored {
  bool healthy = false;     // ought to be used
  bool used = false;        // the verdict is not `refuse`
  bool wrong = false;
  bool converged = false;   // both intervals exist
  bool in_68 = false, in_95 = false;     // the intervals of the pi length (lines: of the centre) hold the truth
  bool rightly_refused = false;          // with a reason that the family asks for
  double off = std::numeric_limits<double>::quiet_NaN();       // error of that over its bound; healthy, used scans
  double rabi_off = std::numeric_limits<double>::quiet_NaN();  // of rabi_hz, with the true dynamics given
  double held_against = std::numeric_limits<double>::quiet_NaN();  // deviance against the truth; where it was asked
  std::string refusal;      // most serious reason; empty: used
};

/// Definitions. Truth: of a pulse, its best length on the carrier as it stands; of a line, its centre.
/// Wrong: used, though off by more than 50 mrad of rotation (a tenth of the line's width) with a deviance above 25 held against
/// the truth; or off by as much and by more than five of its own sigmas where an alias in `expect` fits as well; or used where
/// nothing is to be found; or two lines used where one line leaves a deviance of 60 or more (nobody could tell two lines that
/// one describes).
/// Healthy: at least one cycle, bounds that pass the gates of angle (carrier) error and cycles with 1.5 to spare, an expected
/// gain over a flat line of at least 60; for lines the carrier step as well.
Scored score(const Case& of, const Family& family, const Answered& answered);

/// The same of another's reply to the case, of which verdict, reasons, and the first pulses or `line_offset_hz` are read; its
/// intervals are not scored. `ours` is the daemon's fit of the same scan, by which deviances are counted. An answer that is off by
/// as much is wrong as well where the data hold more than 25 against the answer instead of the truth: the daemon's stands at the
/// likelihood's maximum, another's need not.
Scored score_other(const Case& of, const Family& family, const wire::Fitted& theirs, const infer::Fit& ours);

/// Healthy by its bounds alone; `width` of a line, rad/s. What a family says besides (kind, history) is not asked.
bool is_healthy(const Case& of, const Bound& bound, double width);

/// A row of the table.
struct Row {
  std::string family;
  std::int64_t scans = 0, healthy = 0, healthy_used = 0, used = 0, wrong = 0, converged = 0, in_68 = 0, in_95 = 0, rightly_refused = 0;
  std::int64_t used_converged = 0, used_in_68 = 0, used_in_95 = 0;  // of those used
  std::int64_t measured = 0, rabi_measured = 0;  // scans behind the next two
  double rms_over_bound = 0, rabi_rms_over_bound = 0;
  std::int64_t examined = 0, decidable = 0, decidable_used = 0;  // healthy scans asked whether they are decidable; see run.hpp
  std::map<std::string, std::int64_t> refusals;
};
Row gather(const Family& family, std::span<const Scored> scans);

}  // namespace halfturn::campaign
