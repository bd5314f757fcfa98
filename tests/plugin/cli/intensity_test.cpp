// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/intensity.hpp"

#include "tests/support/catch.hpp"

using halfturn::cli::sources_once;

// One publication stood there twice or thrice, once with each number taken from it.
TEST_CASE("a source is named once, with all that is said of it") {
  const std::vector<std::string> sources = {"A. One (2015), 2.89 over sqrt 2", "B. Two", "A. One (2015)", "A. One (2015), table 1", "B. Twosome"};
  CHECK(sources_once(sources) == std::vector<std::string>{"B. Two", "A. One (2015): 2.89 over sqrt 2; table 1", "B. Twosome"});
  CHECK(sources_once({"A. One", "A. One; B. Two", "B. Two; A. One, page 3"}) == std::vector<std::string>{"A. One: page 3", "B. Two"});
  CHECK(sources_once({}).empty());
}
