// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/layout.hpp"

#include <algorithm>
#include <initializer_list>

namespace halfturn::cli {

std::size_t width(std::string_view text) {
  std::size_t columns = 0;
  for (std::size_t i = 0; i < text.size(); ++i) {
    if (text[i] == '\033') {
      while (i < text.size() && text[i] != 'm') ++i;
    } else if ((static_cast<unsigned char>(text[i]) & 0xC0u) != 0x80u) {
      ++columns;
    }
  }
  return columns;
}

std::string padded(std::string text, std::size_t columns) {
  const std::size_t has = width(text);
  if (has < columns) text.append(columns - has, ' ');
  return text;
}

namespace {

/// `4`, `-0.200`, `125.34(12)`, `1e-6`.
bool is_number(std::string_view word) {
  const auto digits = word.find_first_of("0123456789");
  return digits <= 2 && word.find_first_not_of("0123456789.()+-e") == std::string_view::npos;
}

/// A unit as model/quantity/format.hpp writes them, with or without a prefix, or one that is written out here.
bool is_unit(std::string_view word) {
  word = word.substr(0, word.find_last_not_of(".,;:)") + 1);
  for (const std::string_view whole : {"%", "sigma", "min", "h", "days", "e"})
    if (word == whole) return true;
  for (const std::string_view unit : {"Hz", "s", "m", "rad", "W", "W/m\u00b2", "V/m", "T"}) {
    if (!word.ends_with(unit)) continue;
    const auto prefix = word.substr(0, word.size() - unit.size());
    for (const std::string_view known : {"", "y", "z", "a", "f", "p", "n", "\u00b5", "m", "k", "M", "G", "T", "P", "E", "Z", "Y"})
      if (prefix == known) return true;
  }
  return false;
}

/// Where the next piece that may not be broken ends: a word, or a number with its unit.
std::size_t piece_end(std::string_view text) {
  const auto end = std::min(text.find(' '), text.size());
  if (end == text.size() || !is_number(text.substr(0, end))) return end;
  const auto next = std::min(text.find(' ', end + 1), text.size());
  return is_unit(text.substr(end + 1, next - end - 1)) ? next : end;
}

}  // namespace

std::string wrapped(std::string_view text, std::string_view first) {
  const std::string indent(width(first), ' ');
  std::string all(first);
  std::size_t column = indent.size();
  bool begun = false;  // a word stands on this line
  while (!text.empty()) {
    const auto end = piece_end(text);
    const auto word = text.substr(0, end);
    text.remove_prefix(std::min(end + 1, text.size()));
    if (word.empty()) continue;
    if (begun && column + 1 + width(word) > kColumns) {
      all += '\n' + indent;
      column = indent.size();
      begun = false;
    }
    if (begun) all += ' ';
    all += word;
    column += width(word) + (begun ? 1 : 0);
    begun = true;
  }
  return all + '\n';
}

std::string table(const std::vector<std::vector<std::string>>& rows, std::string_view indent) {
  std::vector<std::size_t> widths;
  for (const auto& row : rows) {
    widths.resize(std::max(widths.size(), row.size()));
    for (std::size_t i = 0; i < row.size(); ++i) widths[i] = std::max(widths[i], width(row[i]));
  }
  std::string all;
  for (const auto& row : rows) {
    std::string line(indent);
    for (std::size_t i = 0; i < row.size(); ++i) line += padded(row[i], widths[i]) + "  ";
    line.erase(line.find_last_not_of(' ') + 1);
    all += line + '\n';
  }
  return all;
}

}  // namespace halfturn::cli
