# SPDX-License-Identifier: Apache-2.0
# Writes OUT, a C++ source that holds the text of each of FILES; run by halfturn_embed at build time.
set(entries "")
foreach(file IN LISTS FILES)
  file(READ ${file} text HEX)
  file(RELATIVE_PATH name ${ROOT} ${file})
  string(REGEX REPLACE "([0-9a-f][0-9a-f])" "'\\\\x\\1'," bytes "${text}")
  string(MAKE_C_IDENTIFIER "${name}" symbol)
  string(APPEND data "constexpr char ${symbol}[] = {${bytes}'\\0'};\n")
  string(APPEND entries "  if (name == \"${name}\") return {${symbol}, sizeof(${symbol}) - 1};\n")
  string(APPEND names "\"${name}\", ")
endforeach()
file(WRITE ${OUT} "// Made by plugin/embed_files.cmake.
#include \"plugin/embedded.hpp\"
namespace halfturn::embedded {
namespace {
${data}}
std::string_view file(std::string_view name) {
${entries}  return {};
}
std::vector<std::string_view> names() { return {${names}}; }
}  // namespace halfturn::embedded
")
