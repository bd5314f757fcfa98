// SPDX-License-Identifier: Apache-2.0
#include "plugin/log/open.hpp"

#include <algorithm>
#include <charconv>
#include <filesystem>
#include <vector>

#include "plugin/embedded.hpp"

namespace halfturn::log {
namespace {

using sqlite::Database;

struct Migration {
  std::int64_t number = 0;
  std::string text;
};

/// Files `log/NNN_name.sql`, in the order of their numbers.
std::vector<Migration> migrations() {
  std::vector<Migration> found;
  for (const auto name : embedded::names()) {
    if (name.substr(0, 4) != "log/") continue;
    Migration migration;
    std::from_chars(name.data() + 4, name.data() + name.size(), migration.number);
    migration.text = std::string(embedded::file(name));
    found.push_back(std::move(migration));
  }
  std::sort(found.begin(), found.end(), [](const auto& a, const auto& b) { return a.number < b.number; });
  return found;
}

struct Identity {
  bool empty = false;        // a file without any table
  std::int64_t version = 0;  // the last migration that it has seen
};

/// What kind of file this is; reads only.
Result<Identity> identify(Database& database, const std::string& path, std::int64_t newest) {
  const auto application = database.integer("PRAGMA application_id", "reading its header");
  if (!application) return tl::unexpected<Fault>(application.error());
  const auto version = database.integer("PRAGMA user_version", "reading its header");
  if (!version) return tl::unexpected<Fault>(version.error());
  const auto tables = database.integer("SELECT count(*) FROM sqlite_schema", "reading its tables");
  if (!tables) return tl::unexpected<Fault>(tables.error());
  if (*application == 0 && *version == 0 && *tables == 0) return Identity{true, 0};
  if (*application != kApplicationId) {
    return fault("log_unavailable", path, "The file " + path + " is a SQLite file of another program, not a Halfturn log. "
                 "It was left untouched; give the configuration another `log`.");
  }
  if (*version > newest) {
    return fault("log_unavailable", path, "The log " + path + " was written by a newer Halfturn (its version is " +
                 std::to_string(*version) + "; this program knows up to " + std::to_string(newest) +
                 "). It was left untouched; start the newer program.");
  }
  return Identity{false, *version};
}

Result<void> check_pages(Database& database, const std::string& path) {
  const auto answer = database.text("PRAGMA quick_check(1)", "checking its pages");
  if (!answer) return tl::unexpected<Fault>(answer.error());
  if (*answer == "ok") return {};
  return fault("log_unavailable", path, "The log " + path + " is damaged: " + *answer + ". Keep the file as it is, restore the "
               "latest backup in its place, or give the configuration another `log`; `sqlite3 " + path +
               " .recover` saves what can still be read.");
}

Result<void> set_manners(Database& database, const std::string& path) {
  const auto mode = database.text("PRAGMA journal_mode = WAL", "setting its journal");
  if (!mode) return tl::unexpected<Fault>(mode.error());
  if (*mode != "wal") {
    return fault("log_unavailable", path, "The log " + path + " cannot keep a write-ahead journal (journal mode `" + *mode +
                 "`). Keep it on a local disk, not on a network file system.");
  }
  // 64 MiB: a journal that a long-running reader made grow is cut back to that.
  return database.run("PRAGMA synchronous = FULL; PRAGMA journal_size_limit = 67108864", "setting its journal");
}

/// One migration in its own transaction; its text sets user_version, which is checked before it is committed.
Result<void> migrate(Database& database, const std::string& path, const Migration& migration) {
  const std::string doing = "bringing it to version " + std::to_string(migration.number);
  auto done = database.run("BEGIN IMMEDIATE", doing);
  if (done) done = database.run(migration.text, doing);
  if (done) {
    const auto version = database.integer("PRAGMA user_version", doing);
    if (!version) done = tl::unexpected<Fault>(version.error());
    else if (*version != migration.number) {
      done = fault("internal", path, "Migration " + std::to_string(migration.number) + " leaves version " +
                   std::to_string(*version) + ".");
    }
  }
  if (done) done = database.run("COMMIT", doing);
  if (!done && database.in_transaction()) (void)database.run("ROLLBACK", doing);
  return done;
}

}  // namespace

Result<std::unique_ptr<Database>> open_to_write(const std::string& path) {
  const auto known = migrations();
  const auto newest = known.empty() ? 0 : known.back().number;
  auto database = Database::open(path, Database::Mode::create);
  if (!database) return database;
  const auto identity = identify(**database, path, newest);
  if (!identity) return tl::unexpected<Fault>(identity.error());
  Result<void> done;
  if (!identity->empty) done = check_pages(**database, path);
  if (done) done = set_manners(**database, path);
  for (const auto& migration : known) {
    if (done && migration.number > identity->version) done = migrate(**database, path, migration);
  }
  if (!done) return tl::unexpected<Fault>(done.error());
  return database;
}

Result<std::unique_ptr<Database>> open_to_read(const std::string& path) {
  std::error_code error;
  if (!std::filesystem::exists(path, error)) {
    return fault("log_unavailable", path, "There is no log at " + path + ". Give the path of the daemon's log: `log` in its "
                 "configuration, relative to the folder of that file.");
  }
  const auto known = migrations();
  const auto newest = known.empty() ? 0 : known.back().number;
  auto database = Database::open(path, Database::Mode::read_only);
  if (!database) return database;
  const auto identity = identify(**database, path, newest);
  if (!identity) return tl::unexpected<Fault>(identity.error());
  if (identity->empty) {
    return fault("log_unavailable", path, "The file " + path + " is empty: no daemon has written a log there yet.");
  }
  if (identity->version < newest) {
    return fault("log_unavailable", path, "The log " + path + " has the older version " + std::to_string(identity->version) +
                 "; this program reads version " + std::to_string(newest) +
                 ". Start `halfturn serve` once on it, which brings it up to date.");
  }
  return database;
}

}  // namespace halfturn::log
