// SPDX-License-Identifier: Apache-2.0
// The grammar of transition names; it stands in catalogue.hpp.
#include <algorithm>
#include <cstdlib>
#include <numeric>
#include <utility>

#include "model/atom/angular.hpp"
#include "model/atom/catalogue.hpp"
#include "model/atom/selection.hpp"

namespace halfturn::atom {
namespace {

const std::string kWhere = "transition";
constexpr std::size_t kLongestName = 200;  // twice what the longest one takes; keeps messages and edit distances small

/// A name taken apart. An unprimed F or m after the arrow stays apart until the line is known.
struct Parts {
  std::string name{};                        // with single blanks
  std::string species{}, first{}, second{};  // first: label or lower term; second: upper term, empty after a label
  std::optional<int> twice_F{}, twice_m{}, twice_F_upper{}, twice_m_upper{};
  std::optional<int> loose_F{}, loose_m{};
  std::optional<Polarisation> polarisation{};
};

auto wrong(const Parts& parts, const std::string& what) {
  return fault("bad_value", kWhere, "'" + parts.name + "': " + what);
}

auto missing(const Parts& parts, const std::string& what) {
  return fault("missing_field", kWhere, "'" + parts.name + "': " + what);
}

std::vector<std::string> words_of(std::string_view text) {
  std::vector<std::string> words;
  std::string word;
  for (const char c : text) {
    if (c != ' ' && c != '\t') {
      word += c;
    } else if (!word.empty()) {
      words.push_back(std::exchange(word, {}));
    }
  }
  if (!word.empty()) words.push_back(word);
  return words;
}

std::string joined(const std::vector<std::string>& words, std::string_view between) {
  std::string text;
  for (const auto& word : words) text += (text.empty() ? std::string() : std::string(between)) + word;
  return text;
}

/// Levenshtein's distance.
std::size_t edit_distance(std::string_view a, std::string_view b) {
  std::vector<std::size_t> row(b.size() + 1);
  std::iota(row.begin(), row.end(), std::size_t{0});
  for (std::size_t i = 1; i <= a.size(); ++i) {
    std::size_t diagonal = std::exchange(row[0], i);
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const std::size_t replaced = diagonal + (a[i - 1] == b[j - 1] ? 0 : 1);
      diagonal = std::exchange(row[j], std::min({row[j] + 1, row[j - 1] + 1, replaced}));
    }
  }
  return row.back();
}

/// The three nearest full names, each in quotes; where some begin as the name does, or with its species, those alone.
std::string near_names(const std::string& name, std::span<const CatalogueLine> lines) {
  const std::string species = name.substr(0, name.find(' ')) + " ";
  std::vector<std::pair<std::size_t, std::string>> ranked;
  for (const auto& known : names(lines)) {
    const bool begins_alike = known.starts_with(name) || known.starts_with(species);
    ranked.emplace_back(edit_distance(name, known) + (begins_alike ? 0 : kLongestName), "'" + known + "'");
  }
  std::stable_sort(ranked.begin(), ranked.end(), [](const auto& a, const auto& b) { return a.first < b.first; });
  std::vector<std::string> best;
  for (const auto& [distance, known] : ranked) {
    const bool is_far = distance >= kLongestName && ranked.front().first < kLongestName;
    if (best.size() < 3 && !is_far) best.push_back(known);
  }
  return best.empty() ? "the catalogue is empty" : "near names are " + joined(best, ", ");
}

Result<void> read_assignment(const std::string& word, bool is_after_arrow, Parts& parts) {
  const auto equals = word.find('=');
  const std::string key = word.substr(0, equals);
  std::optional<int>* slot = nullptr;
  if (key == "F") slot = is_after_arrow ? &parts.loose_F : &parts.twice_F;
  if (key == "m") slot = is_after_arrow ? &parts.loose_m : &parts.twice_m;
  if (key == "F'") slot = &parts.twice_F_upper;
  if (key == "m'") slot = &parts.twice_m_upper;
  if (slot == nullptr) return wrong(parts, "found '" + word + "', expected F=, m=, F'= or m'=");
  if (key.ends_with('\'') && !is_after_arrow)
    return wrong(parts, "found '" + word + "' before the arrow, expected it behind");
  if (*slot) return wrong(parts, key + " is given twice");
  const auto value = read_half(std::string_view(word).substr(equals + 1), kWhere);
  if (!value) return wrong(parts, value.error().message + " after " + key + "=");
  *slot = *value;
  return {};
}

Result<void> read_word(const std::string& word, bool is_after_arrow, Parts& parts) {
  if (word.find('=') != std::string::npos) return read_assignment(word, is_after_arrow, parts);
  if (const auto polarisation = read_polarisation(word)) {
    if (!is_after_arrow) return wrong(parts, "the polarisation " + word + " belongs at the end, behind the arrow");
    if (parts.polarisation) return wrong(parts, "two polarisations are given");
    parts.polarisation = polarisation;
    return {};
  }
  if (word == "nm" && !is_after_arrow && !parts.first.empty()) return {};
  std::string& slot = is_after_arrow ? parts.second : parts.species.empty() ? parts.species : parts.first;
  if (!slot.empty())
    return wrong(parts, "'" + word + "' was not understood behind '" + slot + "'; a polarisation is sigma-, pi or sigma+");
  slot = word;
  return {};
}

Result<Parts> take_apart(std::string_view name, std::span<const CatalogueLine> lines) {
  Parts parts;
  if (name.size() > kLongestName) {
    return fault(
        "bad_value", kWhere,
        "found a name of " + std::to_string(name.size()) + " bytes, expected at most " + std::to_string(kLongestName));
  }
  const auto words = words_of(name);
  parts.name = joined(words, " ");
  bool is_after_arrow = false;
  for (const auto& word : words) {
    if (word == "->" || word == "\u2192") {
      if (std::exchange(is_after_arrow, true)) return wrong(parts, "two arrows are given, expected one");
      continue;
    }
    if (auto read = read_word(word, is_after_arrow, parts); !read) return tl::unexpected(read.error());
  }
  if (!is_after_arrow || parts.first.empty()) {
    return wrong(parts,
                 "expected SPECIES LINE [F=..] [m=..] -> [F'=..] [m'=..] POLARISATION, with a line's label or LOWER -> "
                 "UPPER terms; " +
                     near_names(parts.name, lines));
  }
  return parts;
}

std::string label_of(const CatalogueLine& line) {
  return (line.labels.empty() ? std::string() : line.labels.front() + " or ") + line.lower.term + " -> " + line.upper.term;
}

bool names_line(const Parts& parts, const CatalogueLine& line) {
  if (line.species != parts.species) return false;
  const auto has_label = [&](const std::string& label) {
    return std::find(line.labels.begin(), line.labels.end(), label) != line.labels.end();
  };
  if (!parts.second.empty()) return parts.first == line.lower.term && parts.second == line.upper.term;
  return has_label(parts.first) || (parts.first.ends_with("nm") && has_label(parts.first.substr(0, parts.first.size() - 2)));
}

Result<const CatalogueLine*> find_line(const Parts& parts, std::span<const CatalogueLine> lines) {
  std::vector<const CatalogueLine*> found;
  std::vector<std::string> of_species;
  for (const auto& line : lines) {
    if (names_line(parts, line)) found.push_back(&line);
    if (line.species == parts.species) of_species.push_back(label_of(line));
  }
  if (found.size() == 1) return found.front();
  const std::string line = parts.second.empty() ? parts.first : parts.first + " -> " + parts.second;
  if (found.size() > 1) return wrong(parts, "the catalogue has more than one line " + line + " of " + parts.species);
  if (of_species.empty())
    return wrong(parts, "the catalogue has no species " + parts.species + "; " + near_names(parts.name, lines));
  return wrong(parts, "the catalogue has no line " + line + " of " + parts.species + ", but " + joined(of_species, ", ") +
                          "; " + near_names(parts.name, lines));
}

bool has_one_f(const Level& level, int twice_I) { return twice_I == 0 || level.twice_J == 0; }

/// F = 0 or J = 0 without nuclear spin: m = 0 is all there is.
bool has_one_m(const Parts& parts, const CatalogueLine& line) {
  if (parts.twice_F && line.twice_I != 0) return *parts.twice_F == 0;
  return has_one_f(line.lower, line.twice_I) && line.lower.twice_J + line.twice_I == 0;
}

/// Gives an unprimed F or m behind the arrow to the upper state where it cannot be meant otherwise.
Result<void> settle_loose(const CatalogueLine& line, Parts& parts) {
  if (parts.loose_F) {
    if (parts.twice_F_upper) return wrong(parts, "F and F' both stand behind the arrow; put F before it");
    if (!parts.twice_F && !has_one_f(line.lower, line.twice_I)) {
      return wrong(parts, "write F'= for the upper state behind the arrow, F= before it");
    }
    parts.twice_F_upper = parts.loose_F;
  }
  if (parts.loose_m) {
    if (parts.twice_m_upper) return wrong(parts, "m and m' both stand behind the arrow; put m before it");
    const bool is_clear = parts.twice_m || has_one_m(parts, line) || parts.polarisation == Polarisation::pi;
    if (!is_clear) return wrong(parts, "write m'= for the upper state behind the arrow, m= before it");
    parts.twice_m_upper = parts.loose_m;
  }
  return {};
}

/// F where there is only one; without nuclear spin a stated F is J itself and is dropped after a check.
Result<void> settle_f(const Parts& parts, const Level& level, int twice_I, const std::string& prime,
                      std::optional<int>& twice_F) {
  if (twice_I == 0) {
    if (twice_F && *twice_F != level.twice_J)
      return wrong(parts, level.term + " has no hyperfine structure; leave F" + prime + " out");
    twice_F.reset();
    return {};
  }
  if (!twice_F && level.twice_J == 0) twice_F = twice_I;
  return {};
}

std::string choices(const Level& level, int twice_I) {
  std::vector<std::string> all;
  for (int twice = std::abs(level.twice_J - twice_I); twice <= level.twice_J + twice_I; twice += 2)
    all.push_back(half_text(twice));
  return joined(all, " ");
}

std::string projections(int twice_spin) {
  std::vector<std::string> all;
  for (int twice = -twice_spin; twice <= twice_spin; twice += 2) all.push_back(half_text(twice));
  return joined(all, " ");
}

/// Fills m, m' and the polarisation from each other and from spins of 0.
void settle_m(const CatalogueLine& line, Parts& parts) {
  const int spin = parts.twice_F.value_or(line.lower.twice_J), spin_upper = parts.twice_F_upper.value_or(line.upper.twice_J);
  if (!parts.twice_m && spin == 0) parts.twice_m = 0;
  if (!parts.twice_m_upper && spin_upper == 0) parts.twice_m_upper = 0;
  if (!parts.polarisation) return;
  const int change = 2 * static_cast<int>(*parts.polarisation);
  if (parts.twice_m && !parts.twice_m_upper) parts.twice_m_upper = *parts.twice_m + change;
  if (parts.twice_m_upper && !parts.twice_m) parts.twice_m = *parts.twice_m_upper - change;
}

Result<void> check_complete(const CatalogueLine& line, const Parts& parts) {
  if (line.kind != Multipole::electric_dipole) return {};
  const std::string example =
      line.recommended.empty() ? "" : "; a full name of this line is '" + line.recommended.front() + "'";
  if (line.twice_I != 0 && !parts.twice_F) {
    return missing(parts, "F is missing; " + line.lower.term + " has F = " + choices(line.lower, line.twice_I) + example);
  }
  if (line.twice_I != 0 && !parts.twice_F_upper) {
    return missing(parts, "F' is missing; " + line.upper.term + " has F' = " + choices(line.upper, line.twice_I) + example);
  }
  if (!parts.twice_m && !parts.twice_m_upper) {
    return missing(parts, "m is missing; it is one of " + projections(parts.twice_F.value_or(line.lower.twice_J)) + example);
  }
  if (!parts.twice_m || !parts.twice_m_upper) {
    return missing(parts, "the polarisation is missing; it is sigma-, pi or sigma+" + example);
  }
  return {};
}

}  // namespace

Result<Transition> resolve(std::string_view name, std::span<const CatalogueLine> lines) {
  auto parts = take_apart(name, lines);
  if (!parts) return tl::unexpected(parts.error());
  const auto found = find_line(*parts, lines);
  if (!found) return tl::unexpected(found.error());
  const CatalogueLine& line = **found;
  if (auto settled = settle_f(*parts, line.lower, line.twice_I, "", parts->twice_F); !settled)
    return tl::unexpected(settled.error());
  if (auto settled = settle_loose(line, *parts); !settled) return tl::unexpected(settled.error());
  if (auto settled = settle_f(*parts, line.upper, line.twice_I, "'", parts->twice_F_upper); !settled) {
    return tl::unexpected(settled.error());
  }
  settle_m(line, *parts);
  if (auto complete = check_complete(line, *parts); !complete) return tl::unexpected(complete.error());
  Level lower = line.lower, upper = line.upper;
  lower.twice_F = parts->twice_F, lower.twice_m = parts->twice_m;
  upper.twice_F = parts->twice_F_upper, upper.twice_m = parts->twice_m_upper;
  return make_transition(line, lower, upper, parts->polarisation, parts->name);
}

}  // namespace halfturn::atom
