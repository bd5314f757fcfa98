// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/csv.hpp"

#include <algorithm>

namespace halfturn::config {
namespace {

std::string_view trimmed(std::string_view text) {
  const std::size_t first = text.find_first_not_of(" \t\r");
  if (first == std::string_view::npos) return {};
  return text.substr(first, text.find_last_not_of(" \t\r") - first + 1);
}

class Parser {
 public:
  explicit Parser(std::string_view text) : text_(text) {}

  Table table() {
    while (at_ < text_.size()) line();
    return std::move(table_);
  }

 private:
  char peek() const { return at_ < text_.size() ? text_[at_] : '\n'; }

  void step() {
    const char c = text_[at_++];
    if (c == '\n') ++line_, column_ = 1;
    else if ((static_cast<unsigned char>(c) & 0xC0u) != 0x80u) ++column_;
  }

  void fault(int line, int column, std::string message) { table_.faults.push_back({line, column, "", std::move(message)}); }

  std::string_view rest_of_line() {
    const std::size_t begin = at_;
    while (at_ < text_.size() && text_[at_] != '\n') step();
    const std::string_view rest = text_.substr(begin, at_ - begin);
    if (at_ < text_.size()) step();
    return rest;
  }

  void line() {
    const std::size_t end = std::min(text_.find('\n', at_), text_.size());
    const std::string_view whole = trimmed(text_.substr(at_, end - at_));
    if (whole.empty()) {
      rest_of_line();
    } else if (whole.front() == '#') {
      const int row = line_;
      const std::string_view rest = rest_of_line();
      const std::size_t mark = rest.find('#');
      const std::size_t begin = std::min(rest.find_first_not_of(" \t", mark + 1), rest.size());
      if (table_.rows.empty())
        table_.comments.push_back({std::string(trimmed(rest.substr(begin))), row, static_cast<int>(begin) + 1});
      else
        fault(row, static_cast<int>(mark) + 1,
              "found a line that begins with #, expected such lines before the header only");
    } else {
      row();
    }
  }

  void row() {
    Row cells;
    for (bool more = true; more;) {
      cells.push_back(cell());
      more = peek() == ',' && at_ < text_.size();
      if (more) step();
    }
    if (at_ < text_.size()) step();  // the line's end
    table_.rows.push_back(std::move(cells));
  }

  Cell cell() {
    while (at_ < text_.size() && (text_[at_] == ' ' || text_[at_] == '\t')) step();
    Cell cell{{}, line_, column_};
    if (peek() == '"' && at_ < text_.size()) {
      quoted(cell);
      return cell;
    }
    const std::size_t begin = at_;
    while (peek() != ',' && peek() != '\n') step();
    cell.text = trimmed(text_.substr(begin, at_ - begin));
    if (cell.text.find('"') != std::string::npos)
      fault(cell.line, cell.column, "found a quotation mark within a value, expected it around the whole value");
    return cell;
  }

  void quoted(Cell& cell) {
    step();
    while (at_ < text_.size()) {
      if (text_[at_] == '"') {
        step();
        if (at_ >= text_.size() || text_[at_] != '"') return after_quotes(cell);
      }
      cell.text += text_[at_];
      step();
    }
    fault(cell.line, cell.column, "found an opening quotation mark without its end, expected two");
  }

  void after_quotes(const Cell& cell) {
    const std::size_t begin = at_;
    while (peek() != ',' && peek() != '\n') step();
    if (!trimmed(text_.substr(begin, at_ - begin)).empty())
      fault(cell.line, cell.column, "found text behind the closing quotation mark, expected a comma or the line's end");
  }

  std::string_view text_;
  std::size_t at_ = 0;
  int line_ = 1, column_ = 1;
  Table table_;
};

}  // namespace

Table read_csv(std::string_view text) { return Parser(text).table(); }

}  // namespace halfturn::config
