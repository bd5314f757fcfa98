// SPDX-License-Identifier: Apache-2.0
#include "model/atom/selection.hpp"

#include <algorithm>
#include <cstdlib>

#include "model/atom/angular.hpp"

namespace halfturn::atom {
namespace {

std::string listed(int from, int to) {
  std::string text;
  for (int twice = from; twice <= to; twice += 2) text += (text.empty() ? "" : " ") + half_text(twice);
  return text;
}

/// What the rules are asked about, and where.
struct Question {
  Multipole kind;
  const Level &lower, &upper;
  const std::string& where;
};

auto forbidden(const Question& asked, const std::string& rule) {
  const std::string kind = asked.kind == Multipole::magnetic_dipole ? "a magnetic-dipole" : "an electric-dipole";
  return fault("bad_value", asked.where,
               kind + " transition is forbidden here: " + rule +
                   "; name an allowed pair of states, or declare its kind or state its moment");
}

Result<void> check_parity(const Question& asked) {
  const Level &lower = asked.lower, &upper = asked.upper;
  if (!lower.parity || !upper.parity) return {};
  const std::string even_or_odd = *lower.parity > 0 ? "even" : "odd";
  if (asked.kind == Multipole::magnetic_dipole) {
    if (*lower.parity == *upper.parity) return {};
    return forbidden(asked,
                     "parity must stay, and " + lower.term + " is " + even_or_odd + " while " + upper.term + " is not");
  }
  if (*lower.parity != *upper.parity) return {};
  return forbidden(asked, "parity must change, and " + lower.term + " and " + upper.term + " are both " + even_or_odd);
}

Result<void> check_step(const Question& asked, const std::string& letter, int twice, int twice_upper) {
  const std::string found = letter + " = " + half_text(twice) + " to " + letter + "' = " + half_text(twice_upper);
  if (std::abs(twice_upper - twice) > 2 || (twice_upper - twice) % 2 != 0) {
    return forbidden(asked, letter + " may change by 0 or 1 only, found " + found);
  }
  if (twice == 0 && twice_upper == 0) return forbidden(asked, letter + " = 0 does not go to " + letter + "' = 0");
  return {};
}

Result<void> check_zero_to_zero(const Question& asked, int twice_I) {
  const Level &lower = asked.lower, &upper = asked.upper;
  if (!lower.twice_m || !upper.twice_m || *lower.twice_m != 0 || *upper.twice_m != 0) return {};
  const bool has_f = lower.twice_F && upper.twice_F;
  if (!has_f && twice_I != 0) return {};
  const int spin = has_f ? *lower.twice_F : lower.twice_J;
  const int spin_upper = has_f ? *upper.twice_F : upper.twice_J;
  if (spin != spin_upper) return {};
  const std::string same = has_f ? "F' = F" : "J' = J";
  return forbidden(asked, "m = 0 does not go to m' = 0 where " + same + ", found " + same + " = " + half_text(spin));
}

Result<void> check_projection(const Question& asked, std::optional<Polarisation> polarisation) {
  if (!asked.lower.twice_m || !asked.upper.twice_m) return {};
  const int change = *asked.upper.twice_m - *asked.lower.twice_m;
  const std::string found = "m = " + half_text(*asked.lower.twice_m) + " to m' = " + half_text(*asked.upper.twice_m);
  if (polarisation && change != 2 * static_cast<int>(*polarisation)) {
    const int wanted = static_cast<int>(*polarisation);
    return forbidden(asked, std::string(name_of(*polarisation)) + " polarisation changes m by " + (wanted > 0 ? "+" : "") +
                                std::to_string(wanted) + ", found " + found);
  }
  if (std::abs(change) <= 2 && change % 2 == 0) return {};
  return forbidden(asked, "m may change by 0 or 1 only, found " + found);
}

}  // namespace

Result<void> check_level(const Level& level, int twice_I, const std::string& prime, const std::string& where) {
  if (std::min(twice_I, level.twice_J) < 0 || twice_I + level.twice_J > kLargestTwiceSpin) {
    return fault("bad_value", where,
                 "found J" + prime + " = " + half_text(level.twice_J) + " with nuclear spin " + half_text(twice_I) +
                     ", expected spins of at least 0 that add up to at most " + half_text(kLargestTwiceSpin));
  }
  const int least = std::abs(twice_I - level.twice_J), most = twice_I + level.twice_J;
  if (level.twice_F && !is_triangle(twice_I, level.twice_J, *level.twice_F)) {
    return fault("bad_value", where,
                 "found F" + prime + " = " + half_text(*level.twice_F) + ", but " + level.term + " with nuclear spin " +
                     half_text(twice_I) + " has F" + prime + " = " + listed(least, most));
  }
  if (!level.twice_m || (twice_I != 0 && !level.twice_F)) return {};
  const int spin = level.twice_F.value_or(level.twice_J);
  if (std::abs(*level.twice_m) <= spin && (spin - *level.twice_m) % 2 == 0) return {};
  return fault("bad_value", where,
               "found m" + prime + " = " + half_text(*level.twice_m) + ", but " + (level.twice_F ? "F" : "J") + prime +
                   " = " + half_text(spin) + " has m" + prime + " = " + listed(-spin, spin));
}

Result<void> check_dipole(Multipole kind, const Level& lower, const Level& upper, int twice_I,
                          std::optional<Polarisation> polarisation, const std::string& where) {
  const Question asked{kind, lower, upper, where};
  if (auto parity = check_parity(asked); !parity) return parity;
  if (auto total = check_step(asked, "J", lower.twice_J, upper.twice_J); !total) return total;
  if (lower.twice_F && upper.twice_F) {
    if (auto hyperfine = check_step(asked, "F", *lower.twice_F, *upper.twice_F); !hyperfine) return hyperfine;
  }
  if (auto projection = check_projection(asked, polarisation); !projection) return projection;
  return check_zero_to_zero(asked, twice_I);
}

}  // namespace halfturn::atom
