// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/nearest.hpp"

#include <algorithm>
#include <vector>

namespace halfturn::config {
namespace {

constexpr std::size_t kLongest = 64;  // letters looked at: every key is shorter

char lower(char c) { return c >= 'A' && c <= 'Z' ? static_cast<char>(c - 'A' + 'a') : c; }

}  // namespace

std::size_t edit_distance(std::string_view a, std::string_view b) {
  a = a.substr(0, kLongest);
  b = b.substr(0, kLongest);
  std::vector<std::size_t> before(b.size() + 1), last(b.size() + 1), row(b.size() + 1);
  for (std::size_t j = 0; j <= b.size(); ++j) last[j] = j;
  for (std::size_t i = 1; i <= a.size(); ++i) {
    row[0] = i;
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const std::size_t change = lower(a[i - 1]) == lower(b[j - 1]) ? 0 : 1;
      row[j] = std::min({last[j] + 1, row[j - 1] + 1, last[j - 1] + change});
      const bool swapped = i > 1 && j > 1 && lower(a[i - 1]) == lower(b[j - 2]) && lower(a[i - 2]) == lower(b[j - 1]);
      if (swapped) row[j] = std::min(row[j], before[j - 2] + 1);
    }
    before.swap(last);
    last.swap(row);
  }
  return last[b.size()];
}

std::string_view nearest(std::string_view word, std::span<const std::string_view> known) {
  const auto closer = [&](std::string_view a, std::string_view b) { return edit_distance(word, a) < edit_distance(word, b); };
  const auto best = std::min_element(known.begin(), known.end(), closer);
  return best == known.end() ? std::string_view() : *best;
}

}  // namespace halfturn::config
