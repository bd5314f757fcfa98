// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/layout.hpp"

#include <algorithm>

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

std::string wrapped(std::string_view text, std::string_view first) {
  const std::string indent(width(first), ' ');
  std::string all(first);
  std::size_t column = indent.size();
  bool begun = false;  // a word stands on this line
  while (!text.empty()) {
    const auto end = std::min(text.find(' '), text.size());
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
