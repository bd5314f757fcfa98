// SPDX-License-Identifier: Apache-2.0
// The command line: what is bad usage, and what help and version say.
#include "plugin/cli/arguments.hpp"

#include <vector>

#include "tests/support/catch.hpp"

using namespace halfturn::cli;

namespace {

std::variant<Command, Notice> read(std::vector<const char*> words) {
  words.insert(words.begin(), "halfturn");
  return read_arguments(static_cast<int>(words.size()), words.data());
}

Notice notice(const std::vector<const char*>& words) {
  const auto told = read(words);
  REQUIRE(std::holds_alternative<Notice>(told));
  return std::get<Notice>(told);
}

}  // namespace

TEST_CASE("bad usage is status 2 and says where help is") {
  const std::vector<std::vector<const char*>> bad = {
      {},
      {"nonsense"},
      {"serve"},
      {"serve", "--config"},
      {"serve", "--config", "a", "--threads", "0"},
      {"serve", "--config", "a", "--quiet", "--verbose"},
      {"fit"},
      {"fit", "a.csv", "--nonsense"},
      {"fit", "a.csv", "--plot", "b.svg"},
      {"intensity", "--transition", "X", "--rabi-hz", "fast"},
      {"drift"},
      {"rehearse"},
      {"status", "--timeout-s", "-1"},
      {"check"},
      {"refit"},
      {"next"},
      {"keygen", "d"},
  };
  for (const auto& words : bad) {
    const auto told = notice(words);
    INFO(told.text);
    CHECK(told.status == kBadInput);
    CHECK(told.text.find("--help") != std::string::npos);
  }
}

TEST_CASE("help and version are status 0; help lists what there is and nothing else") {
  const auto help = notice({"--help"});
  CHECK(help.status == kDone);
  for (const char* command : {"serve", "fit", "intensity", "drift", "rehearse", "status", "check"}) {
    CHECK(help.text.find(std::string("\n  ") + command + " ") != std::string::npos);
    const auto own = notice({command, "--help"});
    CHECK(own.status == kDone);
    CHECK(own.text.size() > 100);
    CHECK(own.text.find("--plot") == std::string::npos);
  }
  for (const char* command : {"refit", "next ", "keygen"}) CHECK(help.text.find(command) == std::string::npos);
  const auto version = notice({"--version"});
  CHECK(version.status == kDone);
  CHECK(version.text == std::string("halfturn ") + HALFTURN_VERSION + "\n");
}

TEST_CASE("a good command line is a command") {
  CHECK(std::holds_alternative<Command>(read({"fit", "a.csv", "b.csv", "--json", "--drive", "red"})));
  CHECK(std::holds_alternative<Command>(read({"intensity", "--list"})));
  CHECK(std::holds_alternative<Command>(read({"drift", "--log", "a.db", "--since", "2026-02-03"})));
  CHECK(std::holds_alternative<Command>(read({"rehearse", "--drive", "red", "--hours", "2", "--seed", "7"})));
}

// An unknown word was answered with "A subcommand is required", as if there were none.
TEST_CASE("a word that is no command is named, with the nearest command or with what is to come") {
  CHECK(notice({"ftt"}).text == "halfturn: found \"ftt\", which is no command: the nearest is `fit`\nTry `halfturn --help`.\n");
  CHECK(notice({"statsu", "--json"}).text.find("`status`") != std::string::npos);
  for (const char* later : {"refit", "next", "keygen"}) {
    const auto told = notice({later, "x"});
    CHECK(told.status == kBadInput);
    CHECK(told.text.find("`" + std::string(later) + "` is not available in this version") != std::string::npos);
  }
  CHECK(notice({}).text.find("subcommand") != std::string::npos);
  CHECK(notice({"--help"}).status == kDone);
}
