// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "plugin/config/configuration.hpp"
#include "plugin/wire/request.hpp"
#include "tests/campaign/truth.hpp"

/// The families of simulated scans: what is drawn, over which ranges.
namespace halfturn::campaign {

/// One simulated scan: what is sent, what the daemon is configured with, what the drive has seen before, and what is true.
struct Case {
  std::string_view family;
  std::uint64_t seed = 0, index = 0;
  wire::Scan scan;
  config::Drive drive;
  std::vector<wire::Scan> before;   // scans of the drive's history, oldest first; none: fitted alone
  Apparatus truth;                  // of a drifting scan: at its middle
  double width = 0;                 // lines: full width at half maximum, rad/s
  std::vector<double> expected;     // probability of a bright shot at each point, before outliers and scatter
  double outlier_share = 0;         // points that are none of the signal
  double overdispersion = 1;        // variance over the binomial's
  std::string true_dynamics;        // name of the candidate that is the truth; empty: none of them, or several
  bool to_be_refused = false;       // no answer would be right
  bool misstated = false;           // the dead time is far from what is configured
  bool aliased = false;             // another frequency fits alike, and `expect` holds it
};

/// What the coverage of a family's intervals, and its used scans, are held to.
enum class Kind {
  single,     // the truth is a single candidate
  competing,  // candidates compete
  misfit,     // the truth is none of the candidates
  barren,     // nothing to be found: to be refused
};

struct Family {
  std::string_view name;
  Kind kind = Kind::single;
  bool clean = false;               // undamped: the length's error is held to the bound, which knows what the dynamics are
  std::vector<std::string_view> refusals;  // reasons that are right, where it is to be refused
  void (*draw)(Random& random, Case& into) = nullptr;
};

const std::vector<Family>& families();
const Family* family_named(std::string_view name);

/// The scan of a family with this index: the same for the same seed, family and index, whatever else is drawn.
Case draw(const Family& family, std::uint64_t seed, std::uint64_t index);

}  // namespace halfturn::campaign
