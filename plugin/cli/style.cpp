// SPDX-License-Identifier: Apache-2.0
#include "plugin/cli/style.hpp"

#include <unistd.h>

#include <cstdlib>

namespace halfturn::cli {

bool colour_wanted(int descriptor) {
  const char* no_colour = std::getenv("NO_COLOR");
  if (no_colour != nullptr && *no_colour != '\0') return false;
  const char* terminal = std::getenv("TERM");
  return ::isatty(descriptor) == 1 && terminal != nullptr && std::string_view(terminal) != "dumb";
}

std::string Style::verdict(std::string_view text) const {
  if (text == "apply") return with("1;32", text);
  if (text == "keep") return with("1;33", text);
  if (text == "refuse") return with("1;31", text);
  return std::string(text);
}

std::string Style::with(std::string_view code, std::string_view text) const {
  if (!on_) return std::string(text);
  return "\033[" + std::string(code) + "m" + std::string(text) + "\033[0m";
}

}  // namespace halfturn::cli
