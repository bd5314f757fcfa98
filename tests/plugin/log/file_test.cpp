// SPDX-License-Identifier: Apache-2.0
// What may lie at the log's path, and what the file looks like from outside: read through SQLite itself, not through the log.
#include <sqlite3.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cmath>
#include <filesystem>
#include <fstream>
#include <iterator>

#include "plugin/embedded.hpp"
#include "plugin/log/sqlite_log.hpp"
#include "tests/support/catch.hpp"
#include "tests/support/folder.hpp"
#include "tests/support/log_samples.hpp"
#include "tests/support/raw_sqlite.hpp"

using namespace halfturn;
using namespace halfturn::log;
using Catch::Matchers::Contains;
using tests::raw;

namespace {

std::string contents(const std::string& path) {
  std::ifstream file(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(file), {}};
}

void fill(const std::string& path, int count) {
  auto file = log::open(path, Access::read_write).value();
  tests::LogSamples samples(5);
  REQUIRE(file->begin());
  for (int i = 0; i < count; ++i) {
    auto event = samples.event();
    event.kind = "fit";
    const auto bulk = samples.bulk();
    REQUIRE(file->append(event, &bulk));
  }
  REQUIRE(file->commit());
}

std::string refusal(const std::string& path, Access access = Access::read_write) {
  auto opened = log::open(path, access);
  REQUIRE_FALSE(opened);
  CHECK(opened.error().code == "log_unavailable");
  return opened.error().message;
}

}  // namespace

TEST_CASE("an empty file becomes a log of the newest version, in WAL mode, whole") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  SECTION("no file") {}
  SECTION("an empty file") { std::ofstream(path).flush(); }
  log::open(path, Access::read_write).value();
  CHECK(raw(path, "PRAGMA application_id") == std::to_string(0x48666c6e));
  CHECK(raw(path, "PRAGMA user_version") == "4");
  CHECK(raw(path, "PRAGMA journal_mode") == "wal");
  CHECK(raw(path, "PRAGMA integrity_check") == "ok");
  CHECK(raw(path, "PRAGMA foreign_key_check") == "");
  CHECK(contents(path).substr(68, 4) == "Hfln");  // https://sqlite.org/fileformat2.html, 1.3: application id at byte 68
  const std::string ours = "FROM pragma_table_list WHERE schema = 'main' AND type = 'table' AND name NOT LIKE 'sqlite_%'";
  CHECK(raw(path, "SELECT count(*) " + ours) == "6");
  CHECK(raw(path, "SELECT count(*) " + ours + " AND strict = 0") == "0");
}

TEST_CASE("a log of the first version opens with its rows, which say what they did") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  CHECK(raw(path, std::string(embedded::file("log/001_first.sql"))) == "");
  CHECK(raw(path, "INSERT INTO event (number, drive, kind, happened_at, received_at, id, scan_name, axis, verdict, effect, reasons, rabi_hz, "
                  "rabi_sigma_hz, dead_time_s, dead_time_sigma_s, by_whom, why) VALUES (1, 'red', 'fit', 7, 8, 'a', 'first', 'duration', 'apply', "
                  "'first', 'first', 125340.0, 120.0, 2e-9, 5e-9, '', '')") == "");
  const auto opened = log::open(path, Access::read_write);
  REQUIRE(opened);
  CHECK(raw(path, "PRAGMA user_version") == "4");
  std::vector<Event> events;
  REQUIRE((*opened)->replay([&events](const Event& event) { events.push_back(event); }));
  REQUIRE(events.size() == 1);
  CHECK(events[0].rabi_hz == 125340.0);
  CHECK(events[0].rabi_mean_hz == 125340.0);
  CHECK(events[0].rabi_mean_sigma_hz == 120.0);
  CHECK(events[0].dead_time_s == 2e-9);
  CHECK(std::isnan(events[0].dead_time_points_s));
  CHECK(std::isnan(events[0].dead_time_points_sigma_s));
}

TEST_CASE("values stand in columns and lists in rows, with NULL for what there is not") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  auto file = log::open(path, Access::read_write).value();
  Event event;
  event.drive = "red";
  event.kind = "fit";
  event.happened_at = 1'700'000'000'000'000'001;
  event.rabi_hz = 125340.0;
  event.rabi_sigma_hz = tests::kNone;
  event.pulses_s = {{"flip", 4e-6}, {"split", 2e-6}};
  const Bulk bulk{"scan", "print", "configuration", "reply", {{"room_c", 21.5}, {"cell_c", tests::kNone}}};
  REQUIRE(file->begin());
  REQUIRE(file->append(event, &bulk));
  REQUIRE(file->keep_configuration("f1", "format: 1\n", 5));
  REQUIRE(file->keep_configuration("f1", "another", 6));
  REQUIRE(file->commit());
  CHECK(raw(path, "SELECT rabi_hz, rabi_sigma_hz IS NULL, happened_at FROM event") == "125340.0|1|1700000000000000001");
  CHECK(raw(path, "SELECT group_concat(name || '=' || length_s, ' ') FROM pulse") == "flip=4.0e-06 split=2.0e-06");
  CHECK(raw(path, "SELECT group_concat(name || '=' || ifnull(value, 'null'), ' ') FROM ambient") == "cell_c=null room_c=21.5");
  CHECK(raw(path, "SELECT typeof(scan), typeof(reply), fingerprint, configuration FROM fit") == "blob|blob|print|configuration");
  CHECK(raw(path, "SELECT text FROM configuration") == "format: 1\n");
}

TEST_CASE("a log of version 1 is brought up to date and keeps its rows") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  std::ifstream first(std::string(HALFTURN_SOURCE_DIR) + "/schemas/log/001_first.sql");
  const std::string text{std::istreambuf_iterator<char>(first), {}};
  raw(path, text + "INSERT INTO event VALUES (1, 'red', 'fit', 5, 6, 'a', 'flop', 'duration', 'apply', 'first', '', 125340.0, 120.0, NULL, NULL, "
                   "NULL, NULL, NULL, NULL, NULL, NULL, NULL, NULL, NULL, 0.5, 2e-5, 5e-7, '', '');"
                   "INSERT INTO event VALUES (2, 'red', 'applied', 7, 8, 'b', '', '', '', '', '', NULL, NULL, NULL, NULL, NULL, NULL, NULL, NULL, "
                   "NULL, NULL, NULL, NULL, NULL, NULL, NULL, NULL, '', '');"
                   "INSERT INTO pulse VALUES (2, 'flip', 4e-6)");
  CHECK_THAT(refusal(path, Access::read_only), Contains("older version 1"));
  auto file = log::open(path, Access::read_write).value();
  CHECK(raw(path, "PRAGMA user_version") == "4");
  Event later;
  later.drive = "red";
  later.kind = "applied";
  later.id = "c";
  later.amplitudes = {{"level", 0.5}};
  REQUIRE(file->begin());
  REQUIRE(file->append(later, nullptr));
  REQUIRE(file->commit());
  std::vector<Event> events;
  REQUIRE(file->replay([&](const Event& event) { events.push_back(event); }));
  REQUIRE(events.size() == 3);
  CHECK(events[0].rabi_hz == 125340.0);
  CHECK(std::isnan(events[0].rabi_per_amplitude_hz));
  CHECK(events[0].drive_amplitude == 0.5);
  CHECK(events[0].rabi_mean_hz == 125340.0);
  CHECK(events[1].pulses_s == std::map<std::string, double>{{"flip", 4e-6}});
  CHECK(events[1].amplitudes.empty());
  CHECK(events[2].pulses_s.empty());
  CHECK(events[2].amplitudes == std::map<std::string, double>{{"level", 0.5}});
  CHECK(raw(path, "SELECT length_s IS NULL, amplitude FROM pulse WHERE name = 'level'") == "1|0.5");
}

TEST_CASE("a value of the wrong type cannot come in, nor a row that belongs to nothing") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  fill(path, 1);
  CHECK_THAT(raw(path, "UPDATE event SET rabi_hz = 'fast'"), Contains("cannot store TEXT value in REAL column"));
  CHECK_THAT(raw(path, "UPDATE fit SET reply = 'text'"), Contains("cannot store TEXT value in BLOB column"));
  CHECK_THAT(raw(path, "UPDATE event SET kind = 'guess'"), Contains("CHECK constraint failed"));
  CHECK_THAT(raw(path, "INSERT INTO pulse (event, name, length_s) VALUES (99, 'flip', 1e-6)"), Contains("FOREIGN KEY constraint failed"));
}

TEST_CASE("histories and events are read along an index, without sorting") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  fill(path, 1);
  const std::string tail = " (happened_at, number) > (0, 0) AND happened_at <= 9 ORDER BY happened_at, number LIMIT 5";
  const auto of_drive = raw(path, "EXPLAIN QUERY PLAN SELECT * FROM event WHERE drive = 'red' AND" + tail);
  CHECK_THAT(of_drive, Contains("USING INDEX event_of_drive") && !Contains("TEMP B-TREE"));
  const auto of_all = raw(path, "EXPLAIN QUERY PLAN SELECT * FROM event WHERE" + tail);
  CHECK_THAT(of_all, Contains("USING INDEX event_in_time") && !Contains("TEMP B-TREE"));
}

TEST_CASE("a file of another kind is refused and left as it was") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  std::string expected;
  SECTION("a SQLite file of another program") {
    raw(path, "CREATE TABLE t (x); PRAGMA user_version = 1");
    expected = "another program";
  }
  SECTION("a SQLite file with an identity of its own") {
    raw(path, "PRAGMA application_id = 77; CREATE TABLE t (x)");
    expected = "another program";
  }
  SECTION("no SQLite file at all") {
    std::ofstream(path) << std::string(5000, 'x');
    expected = "not a database";
  }
  SECTION("a log of a newer program") {
    fill(path, 1);
    raw(path, "PRAGMA user_version = 1000");
    expected = "newer Halfturn";
  }
  const auto before = contents(path);
  REQUIRE_FALSE(before.empty());
  CHECK_THAT(refusal(path), Contains(expected) && Contains(path));
  CHECK_THAT(refusal(path, Access::read_only), Contains(expected));
  CHECK(contents(path) == before);
}

TEST_CASE("a damaged log is reported with advice and left as it was") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  fill(path, 300);
  auto bytes = contents(path);
  REQUIRE(bytes.size() > 16 * 4096);
  SECTION("pages overwritten") {
    for (std::size_t at = 4 * 4096; at < 12 * 4096; ++at) bytes[at] = static_cast<char>(at * 31 % 251);
  }
  SECTION("cut short") { bytes.resize(6 * 4096); }
  std::ofstream(path, std::ios::binary | std::ios::trunc).write(bytes.data(), static_cast<std::streamsize>(bytes.size()));
  CHECK_THAT(refusal(path), (Contains("damaged") || Contains("malformed")) && Contains("Keep the file") && Contains("backup"));
  CHECK(contents(path) == bytes);
}

TEST_CASE("paths where no log can be are refused in words") {
  tests::Folder folder;
  CHECK_THAT(refusal(folder / "missing/nights.db"), Contains("folder exists"));
  CHECK_THAT(refusal(folder / "."), Contains("is a folder"));
  CHECK_THAT(refusal(folder / "nights.db", Access::read_only), Contains("There is no log at"));
  CHECK_FALSE(std::filesystem::exists(folder / "nights.db"));
  CHECK_THAT(refusal(""), Contains("no path"));
  std::ofstream(folder / "empty.db").flush();
  CHECK_THAT(refusal(folder / "empty.db", Access::read_only), Contains("no daemon has written"));
}

TEST_CASE("a second writer is refused with the number of the first, also under another name of the file") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  auto first = log::open(path, Access::read_write).value();
  std::filesystem::create_symlink(path, folder / "link.db");
  const auto who = "Process " + std::to_string(getpid());
  CHECK_THAT(refusal(path), Contains(who) && Contains("already"));
  CHECK_THAT(refusal(folder / "link.db"), Contains(who));
  first.reset();
  CHECK(log::open(path, Access::read_write));
}

TEST_CASE("a reader reads while the writer writes, and sees whole groups alone") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  auto writer = log::open(path, Access::read_write).value();
  auto reader = log::open(path, Access::read_only).value();
  tests::LogSamples samples(8);
  for (std::size_t group = 0; group < 50; ++group) {
    REQUIRE(writer->begin());
    REQUIRE(writer->append(samples.event(), nullptr));
    CHECK(reader->events({}).value().size() == 2 * group);
    REQUIRE(writer->append(samples.event(), nullptr));
    CHECK(writer->events({}).value().size() == 2 * group + 2);
    REQUIRE(writer->commit());
    CHECK(reader->events({}).value().size() == 2 * group + 2);
  }
  const auto written = reader->begin();
  REQUIRE_FALSE(written);
  CHECK(written.error().code == "log_unavailable");
}

TEST_CASE("a write waits for nobody for ever: another program's lock is a fault that says so") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  auto file = log::open(path, Access::read_write).value();
  sqlite3* other = nullptr;
  REQUIRE(sqlite3_open(path.c_str(), &other) == SQLITE_OK);
  REQUIRE(sqlite3_exec(other, "BEGIN IMMEDIATE", nullptr, nullptr, nullptr) == SQLITE_OK);
  const auto blocked = file->begin();
  REQUIRE_FALSE(blocked);
  CHECK_THAT(blocked.error().message, Contains("Another program has locked it"));
  sqlite3_close(other);
  CHECK(file->begin());
}
