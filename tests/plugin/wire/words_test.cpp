// SPDX-License-Identifier: Apache-2.0
#include "plugin/wire/words.hpp"

#include <array>

#include "plugin/wire/time.hpp"
#include "tests/support/catch.hpp"

using namespace halfturn::wire;

TEST_CASE("times of day") {
  // Epoch seconds by GNU date: date -u -d TEXT +%s.
  CHECK(parse_time("1970-01-01T00:00:00Z") == 0);
  CHECK(parse_time("2026-02-03T04:05:06Z") == 1'770'091'506'000'000'000);
  CHECK(parse_time("2024-02-29T23:59:59.25+05:30") == 1'709'231'399'250'000'000);
  CHECK(parse_time("1969-12-31T23:59:59.999999999z") == -1);
  CHECK(parse_time("2026-02-03 04:05:06-00:00") == 1'770'091'506'000'000'000);
  CHECK(parse_time("2026-02-03T04:05:06.1234567899Z") == 1'770'091'506'123'456'789);
  CHECK(parse_time("2016-12-31T23:59:60Z") ==
        parse_time("2017-01-01T00:00:00Z"));  // the leap second of 2016 (IERS Bulletin C 52)
  for (const char* wrong : {"", "2026", "2026-02-03", "2026-02-03T04:05:06", "2025-02-29T00:00:00Z", "2026-13-01T00:00:00Z",
                            "2026-02-03T24:00:00Z", "2026-02-03T04:60:06Z", "2026-02-03T04:05:61Z", "2026-02-03T04:05:06.Z",
                            "2026-02-03T04:05:06+0100", "2026-02-03T04:05:06Z ", "2026-02-03T04:05:06+24:00",
                            "2026-2-3T04:05:06Z", "1500-01-01T00:00:00Z", "2262-06-01T00:00:00Z", "+026-02-03T04:05:06Z"})
    CHECK(parse_time(wrong) == std::nullopt);
  CHECK(format_time(0) == "1970-01-01T00:00:00Z");
  CHECK(format_time(-1) == "1969-12-31T23:59:59.999999999Z");
  CHECK(format_time(1'770'091'506'120'000'000) == "2026-02-03T04:05:06.120Z");
  CHECK(format_time(1'770'091'506'000'007'000) == "2026-02-03T04:05:06.000007Z");
  for (const Time time : {Time{0}, Time{-1}, Time{1'770'091'506'123'456'789}, Time{-9'000'000'000'000'000'001}})
    CHECK(parse_time(format_time(time)) == time);
}

TEST_CASE("UTF-8") {
  // The examples of RFC 3629, sections 7 and 10, and Unicode 15, table 3-7.
  for (const char* good :
       {"", "A\xE2\x89\xA2\xCE\x91.", "\xED\x95\x9C", "\xE6\x97\xA5", "\xEF\xBB\xBF\xF0\xA3\x8E\xB4", "\xF4\x8F\xBF\xBF"})
    CHECK(is_utf8(good));
  for (const char* bad : {"\xC0\x80", "\xC1\xBF", "\xED\xA1\x8C", "\xE0\x9F\xBF", "\xF0\x8F\xBF\xBF", "\xF4\x90\x80\x80",
                          "\xF5\x80\x80\x80", "\x80", "\xE2\x89", "a\xFF"})
    CHECK_FALSE(is_utf8(bad));
  CHECK(characters("\xC2\xB5s") == 2);
  CHECK_FALSE(is_printable("a\xC2\x85", 9));
  CHECK_FALSE(is_printable("\x7F", 9));
  CHECK(is_printable("\xC2\xB5", 1));
}

TEST_CASE("distances between words") {
  // Levenshtein's textbook pair, and one swap (optimal string alignment counts it once).
  CHECK(edit_distance("kitten", "sitting") == 3);
  CHECK(edit_distance("fti", "fit") == 1);
  CHECK(edit_distance("", "abc") == 3);
  CHECK(edit_distance("same", "same") == 0);
  const std::array<std::string_view, 3> names = {"counts", "shots", "sigma"};
  CHECK(nearest("count", names) == "counts");
  CHECK(nearest("shot", names) == "shots");
}

TEST_CASE("texts from outside in a sentence") {
  CHECK(in_quotes("a\nb\xff") == "\"a?b?\"");
  CHECK(in_quotes(std::string(50, 'x')) == "\"" + std::string(40, 'x') + "...\"");
}
