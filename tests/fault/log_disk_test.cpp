// SPDX-License-Identifier: Apache-2.0
// A disk that fills, as a limit on the size of files (any user) and as a small file system (where the test may mount one).
// Both run in a child process, so that limits and mounts end with it; its exit status says which step failed.
#include <fcntl.h>
#include <sched.h>
#include <signal.h>
#include <sys/mount.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include <functional>
#include <string>
#include <vector>

#include "plugin/log/sqlite_log.hpp"
#include "tests/support/catch.hpp"
#include "tests/support/folder.hpp"
#include "tests/support/raw_sqlite.hpp"

using namespace halfturn;
using namespace halfturn::log;

namespace {

constexpr int kNoMount = 77;

Event fit_event() {
  Event event;
  event.drive = "red";
  event.kind = "fit";
  return event;
}

/// One group of two fits of 20 kB. The fault of the first step that failed, else none.
Result<void> write_group(Log& file) {
  const Bulk bulk{std::string(10'000, 's'), "print", "configuration", std::string(10'000, 'r'), {}};
  if (auto done = file.begin(); !done) return done;
  for (int i = 0; i < 2; ++i) {
    if (auto stored = file.append(fit_event(), &bulk); !stored) return tl::unexpected<Fault>(stored.error());
  }
  return file.commit();
}

std::size_t count(Log& file) {
  Range all;
  all.limit = 0;
  return file.events(all).value().size();
}

/// Fills the disk, looks at the faults, makes room, goes on. 0 where all is right, else the number of the step.
int fill_and_go_on(const std::string& path, const std::string& word, const std::function<void()>& make_room) {
  auto opened = log::open(path, Access::read_write);
  if (!opened) return 1;
  Log& file = **opened;
  std::size_t groups = 0;
  Result<void> done = write_group(file);
  for (; done && groups < 1000; done = write_group(file)) ++groups;
  if (done || groups < 3) return 2;
  for (int again = 0; again < 3; ++again) {
    const auto& message = done.error().message;
    if (done.error().code != "log_unavailable") return 3;
    if (message.find(word) == std::string::npos || message.find("writing then goes on by itself") == std::string::npos) return 4;
    if (file.commit()) return 5;                // the group is gone
    if (count(file) != 2 * groups) return 6;    // and nothing of it is left; reading goes on
    done = write_group(file);
    if (done) return 7;
  }
  make_room();
  if (!write_group(file)) return 8;
  if (count(file) != 2 * groups + 2) return 9;
  opened->reset();
  if (tests::raw(path, "PRAGMA integrity_check") != "ok") return 10;
  auto again = log::open(path, Access::read_write);
  if (!again) return 11;
  return count(**again) == 2 * groups + 2 ? 0 : 12;
}

int status_of_child(const std::function<int()>& work) {
  const pid_t child = fork();
  if (child == 0) _exit(work());
  int status = 0;
  if (child < 0 || waitpid(child, &status, 0) != child) return -1;
  return WIFEXITED(status) ? WEXITSTATUS(status) : -WTERMSIG(status);
}

void limit_files(rlim_t bytes) {
  rlimit limit{};
  getrlimit(RLIMIT_FSIZE, &limit);
  limit.rlim_cur = bytes;
  setrlimit(RLIMIT_FSIZE, &limit);
}

}  // namespace

TEST_CASE("files that may grow no further: the group is taken back, the fault says so, later groups go through") {
  tests::Folder folder;
  // From a file too small for its journal's checkpoint to one that has had several.
  for (const rlim_t bytes : {400'000u, 1'000'000u, 6'000'000u}) {
    INFO(bytes << " bytes");
    const auto path = folder / ("nights" + std::to_string(bytes) + ".db");
    CHECK(status_of_child([&] {
            signal(SIGXFSZ, SIG_IGN);
            limit_files(bytes);
            return fill_and_go_on(path, "disk I/O error", [] { limit_files(RLIM_INFINITY); });
          }) == 0);
  }
}

TEST_CASE("a full disk: the group is taken back, the fault says so, later groups go through") {
  tests::Folder folder;
  const auto disk = folder / "disk";
  REQUIRE(mkdir(disk.c_str(), 0700) == 0);
  const int status = status_of_child([&] {
    if (unshare(CLONE_NEWNS) != 0 || mount(nullptr, "/", nullptr, MS_REC | MS_PRIVATE, nullptr) != 0) return kNoMount;
    if (mount("halfturn", disk.c_str(), "tmpfs", 0, "size=2m") != 0) return kNoMount;
    return fill_and_go_on(disk + "/nights.db", "full", [&] { mount(nullptr, disk.c_str(), nullptr, MS_REMOUNT, "size=64m"); });
  });
  if (status == kNoMount) {
    WARN("skipped: a small file system can be mounted by root alone");
    return;
  }
  CHECK(status == 0);
}

TEST_CASE("a log cannot be made on a full disk, and says so") {
  tests::Folder folder;
  const auto path = folder / "nights.db";
  CHECK(status_of_child([&] {
          signal(SIGXFSZ, SIG_IGN);
          limit_files(1000);
          const auto opened = log::open(path, Access::read_write);
          if (opened) return 1;
          if (opened.error().message.find("Check the disk") == std::string::npos) return 2;
          limit_files(RLIM_INFINITY);
          return log::open(path, Access::read_write) ? 0 : 3;
        }) == 0);
}
