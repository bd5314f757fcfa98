// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/file.hpp"

#include <algorithm>
#include <filesystem>
#include <fstream>

namespace halfturn::config {

Result<std::string> file_text(const std::string& path, std::size_t limit) {
  std::error_code error;
  if (std::filesystem::is_directory(path, error)) return fault("bad_value", path, "found a folder, expected a file");
  std::ifstream stream(path, std::ios::binary);
  if (!stream)
    return fault("bad_value", path, "found no file that can be read, expected one; look at its name and permissions");
  std::string text;
  std::string block(std::size_t{1} << 16, '\0');
  while (text.size() <= limit &&
         (stream.read(block.data(), static_cast<std::streamsize>(block.size())) || stream.gcount() > 0))
    text.append(block, 0, static_cast<std::size_t>(stream.gcount()));
  if (stream.bad()) return fault("bad_value", path, "found a file that cannot be read to its end, expected one that can");
  if (text.size() > limit)
    return fault("bad_value", path, "found more than " + std::to_string(limit) + " bytes, expected fewer");
  return text;
}

}  // namespace halfturn::config
