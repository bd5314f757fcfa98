// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <sqlite3.h>

#include <string>

namespace halfturn::tests {

/// What SQLite itself answers: columns joined by `|`, rows by line feeds; on failure its message.
inline std::string raw(const std::string& path, const std::string& sql) {
  sqlite3* handle = nullptr;
  std::string answer;
  sqlite3_open(path.c_str(), &handle);
  sqlite3_exec(handle, "PRAGMA foreign_keys = ON", nullptr, nullptr, nullptr);
  const auto row = [](void* out, int count, char** values, char**) {
    auto& text = *static_cast<std::string*>(out);
    if (!text.empty()) text += '\n';
    for (int i = 0; i < count; ++i) text += (i == 0 ? "" : "|") + std::string(values[i] == nullptr ? "" : values[i]);
    return 0;
  };
  if (sqlite3_exec(handle, sql.c_str(), row, &answer, nullptr) != SQLITE_OK) answer = sqlite3_errmsg(handle);
  sqlite3_close(handle);
  return answer;
}

}  // namespace halfturn::tests
