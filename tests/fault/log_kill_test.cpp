// SPDX-License-Identifier: Apache-2.0
// A process that writes the log is killed at random moments: what it was told is durable is there, and groups are whole.
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cerrno>
#include <chrono>
#include <map>
#include <random>
#include <vector>

#include "plugin/log/sqlite_log.hpp"
#include "tests/support/catch.hpp"
#include "tests/support/folder.hpp"
#include "tests/support/raw_sqlite.hpp"

using namespace halfturn;
using namespace halfturn::log;

namespace {

constexpr std::int64_t kLargestGroup = 8;

/// What the log must hold under a number: all of it follows from the number and its group.
Event event_of(std::int64_t group, std::int64_t size) {
  Event event;
  event.drive = "red";
  event.kind = "fit";
  event.happened_at = group;
  event.scan_name = std::to_string(size);
  event.pulses_s = {{"flip", 4e-6}, {"split", 2e-6}};
  return event;
}

std::string reply_of(std::int64_t number) {
  return std::string(static_cast<std::size_t>(1000 + number % 7 * 900), static_cast<char>('a' + number % 26));
}

/// Writes groups until it is killed, and tells the number of each committed event. Ends with 1 on any fault.
[[noreturn]] void write_for_ever(const std::string& path, int pipe, std::uint64_t seed) {
  auto file = log::open(path, Access::read_write);
  if (!file) _exit(1);
  std::mt19937_64 random(seed);
  auto number = static_cast<std::int64_t>((*file)->events({}).value().size());
  for (std::int64_t group = number + 1;; group = number + 1) {
    const std::int64_t size = std::uniform_int_distribution<std::int64_t>(1, kLargestGroup)(random);
    if (!(*file)->begin()) _exit(1);
    std::vector<std::int64_t> numbers;
    for (std::int64_t i = 0; i < size; ++i) {
      const Bulk bulk{reply_of(number + 1), "print", "configuration", reply_of(number + 1), {{"room_c", 21.0}}};
      const auto stored = (*file)->append(event_of(group, size), &bulk);
      if (!stored || *stored != ++number) _exit(1);
      if (!(*file)->keep_reply("id-" + std::to_string(number), {"digest", reply_of(number)}, group)) _exit(1);
      numbers.push_back(number);
    }
    if (!(*file)->commit()) _exit(1);
    if (write(pipe, numbers.data(), numbers.size() * sizeof(std::int64_t)) < 0) _exit(1);
  }
}

/// Reads reports until there are `count`, or, without a count, to the end. False after 20 s of silence.
bool read_reports(int pipe, std::vector<std::int64_t>& reports, std::size_t count) {
  while (reports.size() < count) {
    pollfd wait{pipe, POLLIN, 0};
    if (poll(&wait, 1, 20'000) <= 0) return false;
    std::int64_t numbers[kLargestGroup];
    const auto size = read(pipe, numbers, sizeof numbers);
    if (size <= 0) return true;
    reports.insert(reports.end(), numbers, numbers + static_cast<std::size_t>(size) / sizeof(std::int64_t));
  }
  return true;
}

void check_what_is_there(const std::string& path, const std::vector<std::int64_t>& reports) {
  CHECK(tests::raw(path, "PRAGMA integrity_check") == "ok");
  CHECK(tests::raw(path, "PRAGMA foreign_key_check") == "");
  auto opened = log::open(path, Access::read_write);
  INFO((opened ? std::string() : opened.error().message));
  REQUIRE(opened);
  Range all;
  all.limit = 0;
  const auto rows = (*opened)->history(all).value();
  std::map<std::int64_t, std::int64_t> groups;
  for (std::size_t i = 0; i < rows.size(); ++i) {
    const auto number = static_cast<std::int64_t>(i) + 1;
    REQUIRE(rows[i].event.number == number);
    REQUIRE(rows[i].reply == reply_of(number));
    REQUIRE((*opened)->scan(number).value() == reply_of(number));
    REQUIRE((*opened)->find_reply("id-" + std::to_string(number)).value()->reply == reply_of(number));
    REQUIRE(rows[i].event.pulses_s.size() == 2);
    ++groups[rows[i].event.happened_at];
  }
  for (const auto& row : rows) REQUIRE(std::to_string(groups[row.event.happened_at]) == row.event.scan_name);
  if (!reports.empty()) CHECK(static_cast<std::int64_t>(rows.size()) >= reports.back());
}

}  // namespace

TEST_CASE("twenty kills in mid-write lose nothing that was reported and leave whole groups") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  std::mt19937_64 random(20);
  for (int round = 0; round < 20; ++round) {
    INFO("round " << round);
    int ends[2];
    REQUIRE(pipe2(ends, O_CLOEXEC) == 0);
    const pid_t child = fork();
    REQUIRE(child >= 0);
    if (child == 0) write_for_ever(path, ends[1], static_cast<std::uint64_t>(round));
    close(ends[1]);
    // Killed after 1 to 40 reports and up to 3 ms more, so that begin, append, commit and checkpoint are all hit.
    std::vector<std::int64_t> reports;
    const bool alive = read_reports(ends[0], reports, 1 + random() % 40);
    const auto until = std::chrono::steady_clock::now() + std::chrono::microseconds(random() % 3000);
    while (std::chrono::steady_clock::now() < until) {
    }
    kill(child, SIGKILL);
    read_reports(ends[0], reports, SIZE_MAX);
    close(ends[0]);
    int status = 0;
    REQUIRE(waitpid(child, &status, 0) == child);
    REQUIRE(alive);
    REQUIRE(WIFSIGNALED(status));  // it had met no fault of its own
    REQUIRE_FALSE(reports.empty());
    check_what_is_there(path, reports);
  }
}
