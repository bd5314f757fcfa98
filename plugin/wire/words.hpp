// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <span>
#include <string>
#include <string_view>

/// What the sentences of faults are made of, and the tests on texts that come from outside.
namespace halfturn::wire {

/// Whether the bytes are UTF-8 (RFC 3629: shortest form, no surrogates, up to U+10FFFF).
bool is_utf8(std::string_view bytes);

/// The number of characters of a UTF-8 text; nothing is said of other bytes.
std::size_t characters(std::string_view text);

/// Whether a UTF-8 text has 1 to `most` characters and no control characters (C0, DEL, C1).
bool is_printable(std::string_view text, std::size_t most);

/// Whether a text is a name of a drive or a pulse: 1 to 48 of A-Z a-z 0-9 _ -.
bool is_name(std::string_view text);

/// The text in double quotes for a sentence: cut after 40 characters; bytes that are not printable become `?`.
std::string in_quotes(std::string_view text);

/// A number in the fewest digits that read back to it: `0.5`, `-3`, `1e+20`.
std::string number_text(double value);

/// The fewest insertions, deletions, replacements and swaps of neighbours that turn one text into the other (Damerau 1964 in
/// the form of optimal string alignment). Both are cut after 64 bytes.
std::size_t edit_distance(std::string_view one, std::string_view other);

/// The candidate nearest to the text, the first of equals; empty where there are none.
std::string_view nearest(std::string_view text, std::span<const std::string_view> candidates);

}  // namespace halfturn::wire
