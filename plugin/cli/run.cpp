// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/run.hpp"

#include <unistd.h>

#include <exception>
#include <iostream>

#include "plugin/cli/arguments.hpp"

namespace halfturn::cli {

namespace {

Exit do_as_told(int argc, char** argv) {
  const auto told = read_arguments(argc, argv);
  if (const auto* notice = std::get_if<Notice>(&told)) {
    (notice->status == kDone ? std::cout : std::cerr) << notice->text;
    return notice->status;
  }
  Streams streams{std::cout, std::cerr, Style(colour_wanted(STDOUT_FILENO))};
  return std::get<Command>(told)(streams);
}

}  // namespace

int run(int argc, char** argv) {
  try {
    const Exit status = do_as_told(argc, argv);
    if (std::cout.flush()) return status;
    std::cerr << "halfturn: the results could not be written: is the disk full, or the reader gone?\n";
  } catch (const std::exception& error) {
    std::cerr << "halfturn: the program failed: " << error.what() << '\n';
  }
  return kFailed;
}

}  // namespace halfturn::cli
