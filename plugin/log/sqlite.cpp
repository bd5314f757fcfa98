// SPDX-License-Identifier: Apache-2.0
#include "plugin/log/sqlite.hpp"

#include <sqlite3.h>

#include <cmath>
#include <cstring>
#include <limits>

namespace halfturn::log::sqlite {
namespace {

constexpr int kBusyTimeout = 5000;  // ms; a backup of a log of 1 GB holds no lock that long

std::string advice(int code, const std::string& path) {
  switch (code & 0xff) {
    case SQLITE_FULL:
      return "Free space on the disk that holds it; writing then goes on by itself.";
    case SQLITE_IOERR:
      return "Check the disk that holds it (its free space, quota and the kernel's messages); writing then goes on by itself.";
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
      return "Another program has locked it for more than 5 s: close the SQLite shell or browser that has it open for writing.";
    case SQLITE_CORRUPT:
    case SQLITE_NOTADB:
      return "Keep the file as it is, restore the latest backup in its place, or give the configuration another `log`; "
             "`sqlite3 " + path + " .recover` saves what can still be read.";
    case SQLITE_READONLY:
    case SQLITE_PERM:
    case SQLITE_AUTH:
      return "Give this user the right to write the file and its folder.";
    case SQLITE_CANTOPEN:
      return "See that its folder exists and that this user may read and write both.";
    case SQLITE_NOMEM:
      return "Free memory; nothing is wrong with the file.";
    default:
      return "Report it with this sentence; the file is unharmed.";
  }
}

}  // namespace

Result<std::unique_ptr<Database>> Database::open(const std::string& path, Mode mode) {
  sqlite3* handle = nullptr;
  const int flags = mode == Mode::create ? SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE : SQLITE_OPEN_READONLY;
  const int code = sqlite3_open_v2(path.c_str(), &handle, flags | SQLITE_OPEN_NOMUTEX, nullptr);
  std::unique_ptr<Database> database(new Database(path, handle));
  if (handle == nullptr) return fault("log_unavailable", path, "There is not enough memory to open the log.");
  if (code != SQLITE_OK) return tl::unexpected<Fault>(database->trouble("opening it"));
  sqlite3_extended_result_codes(handle, 1);
  sqlite3_busy_timeout(handle, kBusyTimeout);
  sqlite3_db_config(handle, SQLITE_DBCONFIG_DEFENSIVE, 1, nullptr);
  sqlite3_db_config(handle, SQLITE_DBCONFIG_TRUSTED_SCHEMA, 0, nullptr);
  if (auto done = database->run("PRAGMA foreign_keys = ON; PRAGMA cell_size_check = ON", "opening it"); !done) {
    return tl::unexpected<Fault>(done.error());
  }
  return database;
}

Database::~Database() {
  for (auto& [sql, prepared] : prepared_) sqlite3_finalize(prepared.statement);
  sqlite3_close_v2(handle_);
}

Result<void> Database::run(const std::string& sql, std::string_view doing) {
  if (sqlite3_exec(handle_, sql.c_str(), nullptr, nullptr, nullptr) == SQLITE_OK) return {};
  return tl::unexpected<Fault>(trouble(doing));
}

Result<std::int64_t> Database::integer(const std::string& sql, std::string_view doing) {
  Query query(*this, sql, doing);
  auto row = query.step();
  if (!row) return tl::unexpected<Fault>(row.error());
  return *row ? query.integer() : 0;
}

Result<std::string> Database::text(const std::string& sql, std::string_view doing) {
  Query query(*this, sql, doing);
  auto row = query.step();
  if (!row) return tl::unexpected<Fault>(row.error());
  return *row ? query.text() : std::string();
}

bool Database::in_transaction() const { return sqlite3_get_autocommit(handle_) == 0; }

std::int64_t Database::last_row() const { return sqlite3_last_insert_rowid(handle_); }

Fault Database::trouble(std::string_view doing) const {
  const int code = sqlite3_extended_errcode(handle_);
  std::string found = sqlite3_errmsg(handle_);
  const int system = sqlite3_system_errno(handle_);
  const bool of_system = (code & 0xff) == SQLITE_IOERR || (code & 0xff) == SQLITE_FULL || (code & 0xff) == SQLITE_CANTOPEN;
  if (of_system && system != 0) found += std::string(" (") + std::strerror(system) + ")";
  std::string message = "The log " + path_ + " failed while " + std::string(doing) + ": " + found + ". " + advice(code, path_);
  return Fault{"log_unavailable", path_, std::move(message)};
}

Query::Query(Database& database, std::string_view sql, std::string_view doing) : database_(database), doing_(doing) {
  auto found = database_.prepared_.find(sql);
  if (found != database_.prepared_.end() && !found->second.used) {
    cached_ = &found->second;
    cached_->used = true;
    statement_ = cached_->statement;
    return;
  }
  code_ = sqlite3_prepare_v3(database_.handle_, sql.data(), static_cast<int>(sql.size()), SQLITE_PREPARE_PERSISTENT, &statement_,
                             nullptr);
  if (code_ != SQLITE_OK || found != database_.prepared_.end()) return;  // in use further out: this one is finalised after use
  cached_ = &database_.prepared_.emplace(std::string(sql), Database::Prepared{statement_, true}).first->second;
}

Query::~Query() {
  if (cached_ == nullptr) {
    sqlite3_finalize(statement_);
    return;
  }
  sqlite3_reset(statement_);
  sqlite3_clear_bindings(statement_);
  cached_->used = false;
}

void Query::keep(int code) {
  if (code_ == SQLITE_OK) code_ = code;
}

Query& Query::put(std::int64_t value) {
  if (code_ == SQLITE_OK) keep(sqlite3_bind_int64(statement_, ++bound_, value));
  return *this;
}

Query& Query::put(double value) {
  if (std::isnan(value)) return put_null();
  if (code_ == SQLITE_OK) keep(sqlite3_bind_double(statement_, ++bound_, value));
  return *this;
}

Query& Query::put_text(std::string_view value) {
  const char* data = value.data() == nullptr ? "" : value.data();
  if (code_ == SQLITE_OK) keep(sqlite3_bind_text64(statement_, ++bound_, data, value.size(), SQLITE_TRANSIENT, SQLITE_UTF8));
  return *this;
}

Query& Query::put_blob(std::string_view value) {
  const char* data = value.data() == nullptr ? "" : value.data();
  if (code_ == SQLITE_OK) keep(sqlite3_bind_blob64(statement_, ++bound_, data, value.size(), SQLITE_TRANSIENT));
  return *this;
}

Query& Query::put_null() {
  if (code_ == SQLITE_OK) keep(sqlite3_bind_null(statement_, ++bound_));
  return *this;
}

Result<bool> Query::step() {
  if (code_ != SQLITE_OK) return tl::unexpected<Fault>(database_.trouble(doing_));
  column_ = 0;
  const int code = sqlite3_step(statement_);
  if (code == SQLITE_ROW) return true;
  if (code == SQLITE_DONE) return false;
  code_ = code;
  return tl::unexpected<Fault>(database_.trouble(doing_));
}

Result<void> Query::finish() {
  for (;;) {
    auto row = step();
    if (!row) return tl::unexpected<Fault>(row.error());
    if (!*row) break;
  }
  sqlite3_reset(statement_);
  bound_ = 0;
  return {};
}

std::int64_t Query::integer() { return sqlite3_column_int64(statement_, column_++); }

double Query::real() {
  const int column = column_++;
  if (sqlite3_column_type(statement_, column) == SQLITE_NULL) return std::numeric_limits<double>::quiet_NaN();
  return sqlite3_column_double(statement_, column);
}

std::string Query::text() {
  const int column = column_++;
  const auto* data = reinterpret_cast<const char*>(sqlite3_column_text(statement_, column));
  return data == nullptr ? std::string() : std::string(data, static_cast<std::size_t>(sqlite3_column_bytes(statement_, column)));
}

std::string Query::blob() {
  const int column = column_++;
  const auto* data = static_cast<const char*>(sqlite3_column_blob(statement_, column));
  return data == nullptr ? std::string() : std::string(data, static_cast<std::size_t>(sqlite3_column_bytes(statement_, column)));
}

bool Query::next_is_null() const { return sqlite3_column_type(statement_, column_) == SQLITE_NULL; }

}  // namespace halfturn::log::sqlite
