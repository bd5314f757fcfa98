// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

/// Text for a terminal. Widths are in columns: one a UTF-8 character, none for an escape sequence of Style.
namespace halfturn::cli {

inline constexpr std::size_t kColumns = 96;

std::size_t width(std::string_view text);

/// The text with blanks behind it up to `columns`.
std::string padded(std::string text, std::size_t columns);

/// Breaks a sentence at blanks so that no line is longer than kColumns, a longer word apart; a number keeps its unit. The first line begins with
/// `first`, the others with as many blanks. Ends in a line feed.
std::string wrapped(std::string_view text, std::string_view first);

/// Rows as columns of even width, two blanks between them and `indent` before each row; no blanks at the ends of lines.
std::string table(const std::vector<std::vector<std::string>>& rows, std::string_view indent);

}  // namespace halfturn::cli
