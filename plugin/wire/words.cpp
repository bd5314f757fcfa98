// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/words.hpp"

#include <algorithm>
#include <array>
#include <charconv>

namespace halfturn::wire {
namespace {

/// Length of the UTF-8 sequence at the front, 0 where there is none (RFC 3629, section 4).
std::size_t sequence_length(std::string_view bytes) {
  const auto at = [&](std::size_t i) { return i < bytes.size() ? static_cast<unsigned char>(bytes[i]) : 0u; };
  const auto follows = [&](std::size_t i) { return (at(i) & 0xC0u) == 0x80u; };
  const unsigned lead = at(0);
  if (lead < 0x80) return 1;
  if (lead >= 0xC2 && lead <= 0xDF) return follows(1) ? 2 : 0;
  if (lead >= 0xE0 && lead <= 0xEF) {
    const bool shortest = lead != 0xE0 || at(1) >= 0xA0;
    const bool no_surrogate = lead != 0xED || at(1) < 0xA0;
    return follows(1) && follows(2) && shortest && no_surrogate ? 3 : 0;
  }
  if (lead >= 0xF0 && lead <= 0xF4) {
    const bool in_range = (lead != 0xF0 || at(1) >= 0x90) && (lead != 0xF4 || at(1) < 0x90);
    return follows(1) && follows(2) && follows(3) && in_range ? 4 : 0;
  }
  return 0;
}

bool is_control(std::string_view sequence) {
  const auto lead = static_cast<unsigned char>(sequence[0]);
  if (sequence.size() == 1) return lead < 0x20 || lead == 0x7F;
  return sequence.size() == 2 && lead == 0xC2 && static_cast<unsigned char>(sequence[1]) < 0xA0;
}

}  // namespace

bool is_utf8(std::string_view bytes) {
  while (!bytes.empty()) {
    const std::size_t length = sequence_length(bytes);
    if (length == 0) return false;
    bytes.remove_prefix(length);
  }
  return true;
}

std::size_t characters(std::string_view text) {
  return static_cast<std::size_t>(
      std::count_if(text.begin(), text.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xC0u) != 0x80u; }));
}

bool is_printable(std::string_view text, std::size_t most) {
  if (text.empty() || text.size() > 4 * most || characters(text) > most) return false;
  while (!text.empty()) {
    const std::size_t length = sequence_length(text);
    if (length == 0 || is_control(text.substr(0, length))) return false;
    text.remove_prefix(length);
  }
  return true;
}

bool is_name(std::string_view text) {
  return !text.empty() && text.size() <= 48 && std::all_of(text.begin(), text.end(), [](char c) {
    return (c >= 'A' && c <= 'Z') || (c >= 'a' && c <= 'z') || (c >= '0' && c <= '9') || c == '_' || c == '-';
  });
}

std::string in_quotes(std::string_view text) {
  std::string out = "\"";
  for (int shown = 0; !text.empty(); ++shown) {
    if (shown == 40) return out + "...\"";
    const std::size_t length = std::max<std::size_t>(sequence_length(text), 1);
    const std::string_view one = text.substr(0, length);
    if (sequence_length(text) == 0 || is_control(one)) out += '?';
    else out += one;
    text.remove_prefix(length);
  }
  return out + "\"";
}

std::string number_text(double value) {
  std::array<char, 32> text;
  const auto end = std::to_chars(text.data(), text.data() + text.size(), value).ptr;
  return {text.data(), end};
}

std::size_t edit_distance(std::string_view one, std::string_view other) {
  one = one.substr(0, 64);
  other = other.substr(0, 64);
  std::array<std::array<std::size_t, 65>, 3> rows{};
  auto *before = &rows[0], *last = &rows[1], *current = &rows[2];
  for (std::size_t j = 0; j <= other.size(); ++j) (*last)[j] = j;
  for (std::size_t i = 1; i <= one.size(); ++i) {
    (*current)[0] = i;
    for (std::size_t j = 1; j <= other.size(); ++j) {
      const std::size_t replaced = (*last)[j - 1] + (one[i - 1] == other[j - 1] ? 0 : 1);
      std::size_t best = std::min({(*last)[j] + 1, (*current)[j - 1] + 1, replaced});
      if (i > 1 && j > 1 && one[i - 1] == other[j - 2] && one[i - 2] == other[j - 1])
        best = std::min(best, (*before)[j - 2] + 1);
      (*current)[j] = best;
    }
    std::swap(before, last);
    std::swap(last, current);
  }
  return (*last)[other.size()];
}

std::string_view nearest(std::string_view text, std::span<const std::string_view> candidates) {
  const auto best = std::min_element(candidates.begin(), candidates.end(), [&](std::string_view a, std::string_view b) {
    return edit_distance(text, a) < edit_distance(text, b);
  });
  return best == candidates.end() ? std::string_view{} : *best;
}

}  // namespace halfturn::wire
