// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <string_view>
#include <vector>

#include "plugin/config/diagnosis.hpp"

namespace halfturn::config {

struct Cell {
  std::string text;          // without its quotes; blanks around it are taken off where it has none
  int line = 0, column = 0;  // from 1, in characters
};

using Row = std::vector<Cell>;

struct Comment {
  std::string text;  // behind the `#`
  int line = 0, column = 0;
};

/// A table as RFC 4180 (Shafranovich 2005) has it: commas, double quotes, line ends CRLF or LF, the last one optional. Empty
/// lines are left out. Lines that begin with `#` before the first row are `comments`; after it they are faults. Memory stays
/// below a fixed multiple of the text.
struct Table {
  std::vector<Comment> comments;
  std::vector<Row> rows;
  std::vector<Diagnosis> faults;
};
Table read_csv(std::string_view text);

}  // namespace halfturn::config
