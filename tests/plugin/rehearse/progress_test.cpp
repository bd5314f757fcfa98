// SPDX-License-Identifier: Apache-2.0
#include "plugin/rehearse/progress.hpp"

#include <algorithm>
#include <sstream>

#include "tests/support/catch.hpp"

using namespace halfturn::rehearse;

namespace {

std::string shown(bool terminal) {
  std::ostringstream out;
  {
    Progress progress(out, terminal);
    for (int minute = 0; minute <= 480; ++minute) progress.show({minute / 480.0, "2026-02-03T18:00:00Z", "keep"});
  }
  return out.str();
}

}  // namespace

TEST_CASE("Progress is a line every 10 % in a file, and one line rewritten on a terminal") {
  const auto file = shown(false);
  CHECK(std::count(file.begin(), file.end(), '\n') == 11);
  CHECK(std::count(file.begin(), file.end(), '\r') == 0);
  CHECK(file.substr(0, file.find('\n')) == "0 %  2026-02-03T18:00:00Z  last verdict: keep");
  CHECK_THAT(file, Catch::EndsWith("100 %  2026-02-03T18:00:00Z  last verdict: keep\n"));
  const auto terminal = shown(true);
  CHECK(std::count(terminal.begin(), terminal.end(), '\r') == 101);
  CHECK(std::count(terminal.begin(), terminal.end(), '\n') == 1);
}
