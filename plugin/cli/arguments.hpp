// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <functional>
#include <string>
#include <variant>

#include "plugin/cli/command.hpp"

namespace halfturn::cli {

/// What the command line asks for: a command with its options bound, or a text and the exit status that goes with it (help,
/// the version, bad usage).
struct Notice {
  std::string text;
  Exit status = kDone;
};
using Command = std::function<Exit(Streams&)>;

std::variant<Command, Notice> read_arguments(int argc, const char* const* argv);

}  // namespace halfturn::cli
