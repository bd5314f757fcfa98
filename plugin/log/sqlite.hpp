// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstdint>
#include <map>
#include <memory>
#include <string>
#include <string_view>

#include "model/quantity/result.hpp"

struct sqlite3;
struct sqlite3_stmt;

/// SQLite's C interface as owned objects and Results. Used by the log alone.
namespace halfturn::log::sqlite {

class Query;

/// A connection with its prepared statements. One thread at a time.
class Database {
 public:
  enum class Mode { create, read_only };

  /// Opens `path` (never taken for `:memory:` or a URI). Extended result codes, foreign keys on, 5 s of waiting for other
  /// programs' locks, functions in the schema not trusted.
  static Result<std::unique_ptr<Database>> open(const std::string& path, Mode mode);
  ~Database();
  Database(const Database&) = delete;
  Database& operator=(const Database&) = delete;

  /// Runs statements that return no rows. `doing` completes "failed while ...".
  Result<void> run(const std::string& sql, std::string_view doing);

  /// The first column of the first row, as an integer or as text; 0 or empty where there is no row.
  Result<std::int64_t> integer(const std::string& sql, std::string_view doing);
  Result<std::string> text(const std::string& sql, std::string_view doing);

  /// Whether a transaction is open.
  bool in_transaction() const;
  std::int64_t last_row() const;

  /// The connection's last error as a Fault `log_unavailable` with what to do about it.
  Fault trouble(std::string_view doing) const;

 private:
  friend class Query;
  struct Prepared {
    sqlite3_stmt* statement = nullptr;
    bool used = false;
  };

  Database(std::string path, sqlite3* handle) : path_(std::move(path)), handle_(handle) {}

  std::string path_;
  sqlite3* handle_;
  std::map<std::string, Prepared, std::less<>> prepared_;
};

/// One use of a prepared statement: values are bound in order, rows are stepped through, columns are read in order. It is
/// reset at the end of its life. The first error is kept and returned by `step`.
class Query {
 public:
  Query(Database& database, std::string_view sql, std::string_view doing);
  ~Query();
  Query(const Query&) = delete;
  Query& operator=(const Query&) = delete;

  Query& put(std::int64_t value);
  Query& put(double value);  // NaN: NULL
  Query& put_text(std::string_view value);
  Query& put_blob(std::string_view value);
  Query& put_null();

  /// Goes on to the next row; false: there is none.
  Result<bool> step();
  /// Steps to the end, for statements without rows, and makes ready for the next binding.
  Result<void> finish();

  std::int64_t integer();
  double real();             // NULL: NaN
  std::string text();
  std::string blob();
  bool next_is_null() const;

 private:
  void keep(int code);

  Database& database_;
  std::string_view doing_;
  Database::Prepared* cached_ = nullptr;
  sqlite3_stmt* statement_ = nullptr;
  int code_ = 0;
  int bound_ = 0;
  int column_ = 0;
};

}  // namespace halfturn::log::sqlite
