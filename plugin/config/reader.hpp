// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <limits>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "plugin/config/document.hpp"
#include "plugin/config/units.hpp"

namespace halfturn::config {

/// A node and its path, such as `drives.red.pulses.flip`.
struct Place {
  const Node* node = nullptr;
  std::string path;

  explicit operator bool() const { return node != nullptr; }
  Place child(const Node& child) const;          // of a map by its key, of a list by its number
  Place operator[](std::string_view key) const;  // child of a map; empty where there is none
};

/// The numbers that are right, ends included unless open.
struct Range {
  double low = -std::numeric_limits<double>::infinity();
  double high = std::numeric_limits<double>::infinity();
  bool low_is_open = false;
  std::string_view words{};  // `above 0`, `between 0 and 1`
};
inline constexpr Range kAny{};
inline constexpr Range kPositive{0.0, std::numeric_limits<double>::infinity(), true, "above 0"};
inline constexpr Range kNotNegative{0.0, std::numeric_limits<double>::infinity(), false, "of at least 0"};
inline constexpr Range kUnit{0.0, 1.0, false, "between 0 and 1"};

/// The keys of a map: those known, and those that a later version will know.
struct Keys {
  std::span<const std::string_view> known;
  std::span<const std::string_view> later{};
};

/// Takes values out of a document and notes what is wrong with them. An answer is empty where the place is empty or a fault
/// was noted.
class Reader {
 public:
  void fault(const Place& at, std::string message);
  void fault_at_key(const Place& at, std::string message);  // at the key of a map's child instead of its value

  bool map(const Place& at, const Keys& keys);  // whether it is a map; unknown keys are noted
  bool map_of_names(const Place& at,
                    std::string_view what);  // whether it is a map whose keys are names of 1 to 48 characters
  bool list(const Place& at, std::string_view expected);
  Place need(const Place& map, std::string_view key, std::string_view expected);  // the child; its absence is a fault

  std::optional<double> quantity(const Place& at, Dimension dimension, const Range& range = kAny);
  std::optional<std::pair<double, double>> pair(const Place& at, Dimension first, const Range& first_range, Dimension second,
                                                const Range& second_range, std::string_view expected);
  std::optional<long long> integer(const Place& at, long long low, long long high);
  std::optional<bool> flag(const Place& at);
  std::optional<std::string> text(const Place& at, std::string_view expected);
  std::optional<std::size_t> choice(const Place& at, std::span<const std::string_view> words,
                                    std::span<const std::string_view> later = {});

  std::vector<Diagnosis> faults;
};

/// `"45"`, `a list`, `a map`, `nothing`.
std::string found(const Node& node);

/// `one`, `one or two`, `one, two or three`.
std::string listed(std::span<const std::string_view> words);

}  // namespace halfturn::config
